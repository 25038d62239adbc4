#pragma once

#include <expected>
#include <span>
#include <string>
#include <string_view>

#include "driver/units/units.h"

namespace shuntwright::description {

/// A unit as it is written in files.
struct UnitWord {
  std::string_view name;
  double scale;        ///< in the kind's base unit (seconds for durations, degC for temperatures)
  bool alias = false;  ///< understood, but never suggested or printed
};

/// How quantities of one kind are written.
struct QuantityWords {
  std::string_view noun;     ///< "resistance"
  std::string_view example;  ///< "120 ohm"
  std::span<const UnitWord> units;
};

template <class Kind>
const QuantityWords& wordsOf();
// clang-format off
template <> const QuantityWords& wordsOf<units::kind::Resistance>();
template <> const QuantityWords& wordsOf<units::kind::Voltage>();
template <> const QuantityWords& wordsOf<units::kind::Ratio>();
template <> const QuantityWords& wordsOf<units::kind::Strain>();
template <> const QuantityWords& wordsOf<units::kind::Fraction>();
template <> const QuantityWords& wordsOf<units::kind::Length>();
template <> const QuantityWords& wordsOf<units::kind::Force>();
template <> const QuantityWords& wordsOf<units::kind::Stress>();
template <> const QuantityWords& wordsOf<units::kind::Frequency>();
template <> const QuantityWords& wordsOf<units::kind::Area>();
template <> const QuantityWords& wordsOf<units::kind::TemperatureDifference>();
template <> const QuantityWords& wordsOf<units::kind::TemperatureCoefficient>();
// clang-format on
const QuantityWords& durationWords();     ///< base unit: second
const QuantityWords& temperatureWords();  ///< base unit: degC

struct QuantityMistake {
  std::string message;  ///< what is wrong with the text: "unknown unit \"Ohms\" for a resistance"
  std::string remedy;
};

/// Reads "120 ohm" as 120 in the kind's base unit. One number (decimal point, exponent allowed), a blank or
/// none, one unit; upper and lower case differ (mohm, Mohm).
std::expected<double, QuantityMistake> parseQuantity(std::string_view text, const QuantityWords& words);

/// "59.88 kohm": a value in base units with the unit that keeps it nearest above 1, nine figures at most.
std::string show(double base, const QuantityWords& words);

template <class Kind>
std::string show(units::Quantity<Kind> quantity) {
  return show(quantity.in(units::Unit<Kind>{1}), wordsOf<Kind>());
}

}  // namespace shuntwright::description
