#include "driver/description/quantity_text.h"

#include <algorithm>
#include <cctype>
#include <charconv>
#include <cmath>
#include <cstdio>
#include <vector>

#include "driver/description/diagnostics.h"

namespace shuntwright::description {
namespace {

// Within each table the first unit with scale 1 or nearest to it is the base; aliases stand last.
constexpr UnitWord kResistance[] = {{"ohm", 1},
                                    {"mohm", 1e-3},
                                    {"kohm", 1e3},
                                    {"Mohm", 1e6},
                                    {"Gohm", 1e9},
                                    {"\u03A9", 1, true},
                                    {"\u2126", 1, true},
                                    {"k\u03A9", 1e3, true},
                                    {"M\u03A9", 1e6, true},
                                    {"G\u03A9", 1e9, true},
                                    {"m\u03A9", 1e-3, true}};
constexpr UnitWord kVoltage[] = {{"V", 1}, {"mV", 1e-3}, {"uV", 1e-6}, {"\u00B5V", 1e-6, true}};
constexpr UnitWord kRatio[] = {
    {"mV/V", 1e-3}, {"uV/V", 1e-6}, {"V/V", 1}, {"nV/V", 1e-9}, {"\u00B5V/V", 1e-6, true}};
constexpr UnitWord kStrain[] = {{"microstrain", 1e-6},
                                {"um/m", 1e-6, true},
                                {"\u00B5m/m", 1e-6, true},
                                {"ue", 1e-6, true},
                                {"m/m", 1, true}};
constexpr UnitWord kFraction[] = {{"%", 1e-2}, {"ppm", 1e-6}};
constexpr UnitWord kLength[] = {{"m", 1}, {"cm", 1e-2}, {"mm", 1e-3}};
constexpr UnitWord kForce[] = {{"N", 1}, {"kN", 1e3}, {"MN", 1e6}};
constexpr UnitWord kStress[] = {{"Pa", 1}, {"kPa", 1e3}, {"MPa", 1e6}, {"GPa", 1e9}, {"N/mm2", 1e6, true}};
constexpr UnitWord kFrequency[] = {{"Hz", 1}, {"kHz", 1e3}, {"MHz", 1e6}, {"1/s", 1, true}};
constexpr UnitWord kArea[] = {
    {"mm2", 1e-6}, {"cm2", 1e-4}, {"m2", 1}, {"mm\u00B2", 1e-6, true}, {"mm^2", 1e-6, true}};
constexpr UnitWord kDifference[] = {{"K", 1}, {"mK", 1e-3}};
constexpr UnitWord kCoefficient[] = {{"ppm/K", 1e-6}, {"%/K", 1e-2}, {"%/100K", 1e-4, true}, {"1/K", 1, true}, {"/K", 1, true}};
constexpr UnitWord kDuration[] = {{"s", 1},         {"ms", 1e-3}, {"us", 1e-6},
                                  {"ns", 1e-9},     {"min", 60},  {"\u00B5s", 1e-6, true},
                                  {"h", 3600, true}};
constexpr UnitWord kTemperature[] = {{"degC", 1}, {"\u00B0C", 1, true}};

constexpr QuantityWords kWords[] = {
    {"resistance", "120 ohm", kResistance},
    {"voltage", "5 V", kVoltage},
    {"ratio", "2 mV/V", kRatio},
    {"strain", "500 microstrain", kStrain},
    {"fraction", "0.1 %", kFraction},
    {"length", "20 m", kLength},
    {"force", "50 kN", kForce},
    {"stress", "200 MPa", kStress},
    {"frequency", "100 Hz", kFrequency},
    {"area", "18 mm2", kArea},
    {"temperature difference", "5 K", kDifference},
    {"temperature coefficient", "25 ppm/K", kCoefficient},
    {"duration", "500 ms", kDuration},
    {"temperature", "22 degC", kTemperature},
};

std::string_view trimmed(std::string_view text) {
  const auto blank = [](char c) { return c == ' ' || c == '\t'; };
  while (!text.empty() && blank(text.front())) text.remove_prefix(1);
  while (!text.empty() && blank(text.back())) text.remove_suffix(1);
  return text;
}

std::string inQuotes(std::string_view text) {
  return '"' + std::string(text) + '"';
}

std::string unitList(const QuantityWords& words) {
  std::string list;
  for (const UnitWord& unit : words.units)
    if (!unit.alias) list += (list.empty() ? "" : ", ") + std::string(unit.name);
  return list;
}

/// "Ohms" -> "ohm": a plural is tried as a singular first.
std::string_view unitMeant(std::string_view text, const QuantityWords& words) {
  std::vector<std::string_view> names;
  for (const UnitWord& unit : words.units)
    if (!unit.alias) names.push_back(unit.name);
  if (text.ends_with('s') || text.ends_with('S')) {
    const std::string_view singular = nearest(text.substr(0, text.size() - 1), names);
    if (!singular.empty()) return singular;
  }
  return nearest(text, names);
}

}  // namespace

// clang-format off
template <> const QuantityWords& wordsOf<units::kind::Resistance>() { return kWords[0]; }
template <> const QuantityWords& wordsOf<units::kind::Voltage>() { return kWords[1]; }
template <> const QuantityWords& wordsOf<units::kind::Ratio>() { return kWords[2]; }
template <> const QuantityWords& wordsOf<units::kind::Strain>() { return kWords[3]; }
template <> const QuantityWords& wordsOf<units::kind::Fraction>() { return kWords[4]; }
template <> const QuantityWords& wordsOf<units::kind::Length>() { return kWords[5]; }
template <> const QuantityWords& wordsOf<units::kind::Force>() { return kWords[6]; }
template <> const QuantityWords& wordsOf<units::kind::Stress>() { return kWords[7]; }
template <> const QuantityWords& wordsOf<units::kind::Frequency>() { return kWords[8]; }
template <> const QuantityWords& wordsOf<units::kind::Area>() { return kWords[9]; }
template <> const QuantityWords& wordsOf<units::kind::TemperatureDifference>() { return kWords[10]; }
template <> const QuantityWords& wordsOf<units::kind::TemperatureCoefficient>() { return kWords[11]; }
// clang-format on
const QuantityWords& durationWords() {
  return kWords[12];
}
const QuantityWords& temperatureWords() {
  return kWords[13];
}

std::expected<double, QuantityMistake> parseQuantity(std::string_view text, const QuantityWords& words) {
  const std::string like = "write it like " + inQuotes(words.example);
  std::string_view rest = trimmed(text);
  if (rest.starts_with('+')) rest.remove_prefix(1);
  double value = 0;
  const auto [end, problem] = std::from_chars(rest.data(), rest.data() + rest.size(), value);
  if (problem != std::errc() || !std::isfinite(value))
    return std::unexpected(QuantityMistake{inQuotes(text) + " is no " + std::string(words.noun), like});
  rest.remove_prefix(static_cast<std::size_t>(end - rest.data()));
  const std::string number(text.substr(0, static_cast<std::size_t>(end - text.data())));
  if (rest.size() > 1 && rest[0] == ',' && std::isdigit(static_cast<unsigned char>(rest[1])))
    return std::unexpected(QuantityMistake{inQuotes(text) + " is no " + std::string(words.noun),
                                           "write the decimal point as \".\""});
  const std::string_view unit = trimmed(rest);
  if (unit.empty())
    return std::unexpected(
        QuantityMistake{inQuotes(text) + " has no unit; a " + std::string(words.noun) + " needs one",
                        like + " (units: " + unitList(words) + ")"});
  for (const UnitWord& word : words.units)
    if (word.name == unit) return value * word.scale;

  const std::string_view meant = unitMeant(unit, words);
  return std::unexpected(QuantityMistake{
      "unknown unit " + inQuotes(unit) + " for a " + std::string(words.noun),
      meant.empty()
          ? "units of " + std::string(words.noun) + ": " + unitList(words)
          : "did you mean " + inQuotes(std::string(trimmed(number)) + ' ' + std::string(meant)) + "?"});
}

std::string show(double base, const QuantityWords& words) {
  const UnitWord* best = nullptr;
  for (const UnitWord& unit : words.units) {
    if (unit.alias) continue;
    if (!best) {
      best = &unit;
      continue;
    }
    const double magnitude = std::abs(base) * (1 + 1e-12);
    const bool fits = magnitude >= unit.scale;
    const bool bestFits = magnitude >= best->scale;
    if (base != 0 && ((fits && (!bestFits || unit.scale > best->scale)) ||
                      (!fits && !bestFits && unit.scale < best->scale)))
      best = &unit;
  }
  char number[48];
  std::snprintf(number, sizeof number, "%.9g", base / best->scale);
  return std::string(number) + ' ' + std::string(best->name);
}

}  // namespace shuntwright::description
