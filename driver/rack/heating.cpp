#include "driver/rack/heating.h"

#include <algorithm>
#include <array>
#include <cctype>
#include <cmath>
#include <cstdio>
#include <utility>

namespace shuntwright::rack {

using namespace units;

namespace {

std::string text(const char* form, double value) {
  char out[48];
  std::snprintf(out, sizeof out, form, value);
  return out;
}

/// The largest excitation on offer that keeps within `most_V`; nothing when even the least is too much.
std::optional<double> offeredBelow(const description::Inputs& inputs, double most_V) {
  std::optional<double> best;
  for (const Voltage offered : inputs.excitations) {
    if (offered.in(volt) <= most_V && (!best || offered.in(volt) > *best)) best = offered.in(volt);
  }
  return best;
}

}  // namespace

std::optional<double> densityLimit_W_per_m2(std::string_view specimen) {
  std::string words(specimen);
  std::transform(words.begin(), words.end(), words.begin(), [](unsigned char c) { return static_cast<char>(std::tolower(c)); });
  const auto says = [&](const char* word) { return words.find(word) != std::string::npos; };
  const bool thin = says("thin");
  static constexpr std::array<std::pair<const char*, std::pair<double, double>>, 14> table{{
      // heavy and thin section, W/m2. What conducts least comes first: "carbon fibre on steel" is carbon fibre.
      {"plastic", {80, 80}},
      {"wood", {80, 80}},
      {"fibre", {800, 800}},
      {"fiber", {800, 800}},
      {"composite", {800, 800}},
      {"ceramic", {800, 800}},
      {"concrete", {800, 800}},
      {"titanium", {3000, 3000}},
      {"stainless", {3000, 3000}},
      {"steel", {8000, 3000}},
      {"iron", {8000, 3000}},
      {"aluminium", {16000, 8000}},
      {"aluminum", {16000, 8000}},
      {"copper", {16000, 8000}},
  }};
  for (const auto& [word, limits] : table) {
    if (says(word)) return thin ? limits.second : limits.first;
  }
  return std::nullopt;
}

std::optional<GaugeHeating> heatingOf(const description::Rack& rack, const description::Channel& channel) {
  if (channel.transducer) return std::nullopt;
  const auto& sheet = rack.gaugeOf(channel);
  const double resistance_ohm =
      channel.measuredResistance ? channel.measuredResistance->value.in(ohm) : sheet.resistance.value.in(ohm);
  const double half_V = channel.excitation.in(volt) / 2;
  GaugeHeating heating;
  heating.power_W = half_V * half_V / resistance_ohm;
  if (sheet.gridArea) heating.density_W_per_m2 = heating.power_W / sheet.gridArea->in(square_metre);
  heating.limit_W_per_m2 = densityLimit_W_per_m2(sheet.specimen);
  return heating;
}

void warnOfHeating(const description::Rack& rack, description::Diagnostics& diagnostics) {
  for (const auto& channel : rack.channels) {
    const auto heating = heatingOf(rack, channel);
    if (!heating || !heating->density_W_per_m2 || !heating->limit_W_per_m2) continue;
    const double density = *heating->density_W_per_m2, limit = *heating->limit_W_per_m2;
    if (density <= limit) continue;
    const double most_V = channel.excitation.in(volt) * std::sqrt(limit / density);
    const auto offered = offeredBelow(*rack.device(channel.device)->profile->inputs, most_V);
    diagnostics.warning(channel.place,
                        "channel \"" + channel.name + "\": " + text("%.3g V", channel.excitation.in(volt)) +
                            " heat each gauge with " + text("%.3g mW", 1e3 * heating->power_W) + ", " +
                            text("%.2g kW/m2", density / 1e3) + " of grid; " + rack.gaugeOf(channel).specimen +
                            " carries away about " + text("%.2g kW/m2", limit / 1e3) + " before the zero drifts",
                        offered ? "use " + text("%.3g V", *offered) + " of excitation, or a larger gauge or one of more ohms"
                                : "the amplifier offers nothing below " + text("%.2g V", most_V) +
                                      ": use a larger gauge or one of more ohms");
  }
}

}  // namespace shuntwright::rack
