#pragma once

#include <array>
#include <cstddef>
#include <cstdint>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "driver/core/error.h"
#include "driver/description/profile.h"

namespace shuntwright::protocol {

/// Reads a decimal number ("-1.25", "+3", "4e-3") from the front of [p, end), correctly rounded. `p` moves
/// behind it. False, and `p` where it was, when there is no finite number.
bool readDecimal(const char*& p, const char* end, double& value);

/// Marks that readValues sets; their numbers are those of device::SampleFlag.
inline constexpr std::uint8_t kValueSaturated = 1;
inline constexpr std::uint8_t kValueMissing = 2;

/// How an amplifier writes its readings.
struct ValueFormat {
  explicit ValueFormat(const description::Inputs& inputs);

  double scale = 1;                    ///< V/V per unit as sent
  std::array<double, 19> scales{};     ///< the same for 0 to 18 decimals: scale / 10^decimals
  float fullScale = 0;                 ///< V/V; a reading at or beyond it is saturated
  std::vector<std::string> saturated;  ///< words in place of a value
  std::vector<std::string> missing;
  bool numericWords = false;  ///< some word looks like a number: "9.91E37"
};

/// Reads a list of readings without allocating.
/// @param list       text such as "0.1250,-0.0031,OVER"
/// @param separator  of the list, one or more characters
/// @param ratio      out, V/V; its size is how many values there must be. NaN for a word.
/// @param flags      out, same size: kValueSaturated, kValueMissing or 0.
/// @returns true when the list holds exactly that many readable values.
bool readValues(const ValueFormat& format, std::string_view list, std::string_view separator,
                std::span<float> ratio, std::span<std::uint8_t> flags);

/// What readValues found wrong with a list: "expected 16 values, got 15", or the value that is no number.
std::string whatIsWrong(const ValueFormat& format, std::string_view list, std::string_view separator,
                        std::size_t expected);

}  // namespace shuntwright::protocol
