#include "driver/protocol/values.h"

#include <algorithm>
#include <bit>
#include <charconv>
#include <cmath>
#include <cstring>
#include <limits>

#include "driver/core/bytes.h"

namespace shuntwright::protocol {

namespace {

// Powers of ten that a double holds exactly.
constexpr double kPowers[] = {1e0,  1e1,  1e2,  1e3,  1e4,  1e5,  1e6,  1e7,  1e8,  1e9,  1e10, 1e11,
                              1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22};
constexpr std::uint64_t kExact = std::uint64_t{1} << 53;
constexpr std::size_t kFewDigits = 18;  // digits that always fit into 64 bits

bool isDigit(char c) {
  return static_cast<unsigned char>(c - '0') < 10;
}

constexpr std::uint64_t kWholePowers[] = {1, 10, 100, 1000, 10'000, 100'000, 1'000'000, 10'000'000};

/// Appends the digits at `c` to `digits` and gives how many there were; more than 18 in all overflow it.
[[gnu::always_inline]] inline std::size_t takeDigits(const char*& c, const char* end, std::uint64_t& digits) {
  const char* const first = c;
  if constexpr (std::endian::native == std::endian::little) {
    // Eight characters at once: the digits before the first other character, moved up so that zeros stand
    // before them, are added in pairs, fours and eights.
    if (end - c >= 8) {
      std::uint64_t word;
      std::memcpy(&word, c, 8);
      word ^= 0x3030303030303030u;
      const std::uint64_t others = (word | (word + 0x7676767676767676u)) & 0x8080808080808080u;
      const int count = others == 0 ? 8 : std::countr_zero(others) / 8;
      if (count < 8) {
        if (count == 0) return 0;
        word <<= 8 * (8 - count);
        word = word * 10 + (word >> 8);
        word = (((word & 0x000000FF000000FFu) * 0x000F424000000064u) +
                (((word >> 16) & 0x000000FF000000FFu) * 0x0000271000000001u)) >>
               32;
        digits = digits * kWholePowers[count] + word;
        c += count;
        return static_cast<std::size_t>(count);
      }
    }
  }
  while (c != end && isDigit(*c)) digits = digits * 10 + static_cast<std::uint64_t>(*c++ - '0');
  return static_cast<std::size_t>(c - first);
}

/// Sign, digits and a point, few enough digits for a double to hold them exactly.
struct ShortDecimal {
  std::uint64_t digits = 0;
  std::size_t decimals = 0;
  bool negative = false;
};

[[gnu::always_inline]] inline bool readShortDecimal(const char*& p, const char* end, ShortDecimal& out) {
  const char* c = p;
  if (c != end && (*c == '-' || *c == '+')) out.negative = *c++ == '-';
  std::size_t count = takeDigits(c, end, out.digits);
  if (c != end && *c == '.') {
    ++c;
    out.decimals = takeDigits(c, end, out.digits);
    count += out.decimals;
  }
  const bool exponent = c != end && (*c == 'e' || *c == 'E');
  if (count == 0 || count > kFewDigits || out.digits > kExact || exponent) return false;
  p = c;
  return true;
}

bool readAnyDecimal(const char*& p, const char* end, double& value) {
  const char* start = p;
  if (start != end && *start == '+') ++start;
  if (start == end || !(isDigit(*start) || *start == '.' || (*start == '-' && start == p))) return false;
  const char* digits = *start == '-' ? start + 1 : start;
  if (digits == end || !(isDigit(*digits) || *digits == '.')) return false;  // no "inf", no "nan"
  double read = 0;
  const auto result = std::from_chars(start, end, read);
  if (result.ec != std::errc() || !std::isfinite(read)) return false;
  value = read;
  p = result.ptr;
  return true;
}

bool among(const std::vector<std::string>& words, std::string_view word) {
  return std::find(words.begin(), words.end(), word) != words.end();
}

bool isListed(const ValueFormat& format, std::string_view word) {
  return among(format.saturated, word) || among(format.missing, word);
}

/// The text up to the separator or the end, without blanks around it.
std::string_view tokenAt(const char* p, const char* end, std::string_view separator) {
  std::string_view rest(p, static_cast<std::size_t>(end - p));
  rest = rest.substr(0, rest.find(separator));
  while (!rest.empty() && rest.front() == ' ') rest.remove_prefix(1);
  while (!rest.empty() && rest.back() == ' ') rest.remove_suffix(1);
  return rest;
}

double scaleOf(description::ValueUnit unit) {
  switch (unit) {
    case description::ValueUnit::volt_per_volt:
      return 1;
    case description::ValueUnit::millivolt_per_volt:
      return 1e-3;
    case description::ValueUnit::microvolt_per_volt:
      return 1e-6;
  }
  return 1;
}

}  // namespace

bool readDecimal(const char*& p, const char* end, double& value) {
  ShortDecimal number;
  if (!readShortDecimal(p, end, number)) return readAnyDecimal(p, end, value);
  // Integer and power of ten are exact, so the one division is the only rounding and the result is the same
  // as from_chars gives.
  const double magnitude = static_cast<double>(number.digits) / kPowers[number.decimals];
  value = number.negative ? -magnitude : magnitude;
  return true;
}

ValueFormat::ValueFormat(const description::Inputs& inputs)
    : scale(scaleOf(inputs.gives)),
      fullScale(inputs.fullScale > units::Ratio()
                    ? static_cast<float>(inputs.fullScale.in(units::volt_per_volt))
                    : std::numeric_limits<float>::infinity()),
      saturated(inputs.saturated),
      missing(inputs.missing) {
  for (std::size_t decimals = 0; decimals < scales.size(); ++decimals)
    scales[decimals] = scale / kPowers[decimals];
  for (const auto* words : {&saturated, &missing}) {
    for (const std::string& word : *words) {
      const char* p = word.data();
      double value = 0;
      numericWords |= readDecimal(p, p + word.size(), value);
    }
  }
}

bool readValues(const ValueFormat& format, std::string_view list, std::string_view separator,
                std::span<float> ratio, std::span<std::uint8_t> flags) {
  if (separator.empty()) return false;
  const char* p = list.data();
  const char* const end = p + list.size();
  const bool blanks = separator.front() != ' ';
  const auto skipBlanks = [&] {
    while (blanks && p != end && *p == ' ') ++p;
  };
  const auto atSeparator = [&] {
    return p != end && *p == separator.front() &&
           (separator.size() == 1 ||
            std::string_view(p, static_cast<std::size_t>(end - p)).starts_with(separator));
  };
  for (std::size_t i = 0; i < ratio.size(); ++i) {
    skipBlanks();
    const char* const start = p;
    // One multiplication instead of division and scale: within 1e-15, far below the float's own rounding.
    ShortDecimal decimal;
    double value = 0;
    bool number = readShortDecimal(p, end, decimal);
    if (number) {
      value = static_cast<double>(decimal.digits) * format.scales[decimal.decimals];
      value = decimal.negative ? -value : value;
    } else if (readAnyDecimal(p, end, value)) {
      number = true;
      value *= format.scale;
    }
    skipBlanks();
    number = number && (p == end || atSeparator());
    if (number && format.numericWords) number = !isListed(format, tokenAt(start, end, separator));
    if (number) {
      const float v = static_cast<float>(value);
      ratio[i] = v;
      flags[i] = std::fabs(v) >= format.fullScale ? kValueSaturated : 0;
    } else {
      const std::string_view word = tokenAt(start, end, separator);
      if (among(format.saturated, word)) {
        flags[i] = kValueSaturated;
      } else if (among(format.missing, word)) {
        flags[i] = kValueMissing;
      } else {
        return false;
      }
      ratio[i] = std::numeric_limits<float>::quiet_NaN();
      p = word.data() + word.size();
      skipBlanks();
    }
    if (i + 1 < ratio.size()) {
      if (!atSeparator()) return false;
      p += separator.size();
    }
  }
  return p == end;
}

std::string whatIsWrong(const ValueFormat& format, std::string_view list, std::string_view separator,
                        std::size_t expected) {
  std::size_t count = 0;
  std::string_view rest = list;
  for (;;) {
    const std::string_view token = tokenAt(rest.data(), rest.data() + rest.size(), separator);
    float ratio = 0;
    std::uint8_t flag = 0;
    if (!readValues(format, token, separator, std::span(&ratio, 1), std::span(&flag, 1))) {
      if (!(token.empty() && count == 0)) {
        return "value " + std::to_string(count + 1) + " is no number: " + quoted(token);
      }
      break;
    }
    ++count;
    const std::size_t cut = rest.find(separator);
    if (cut == std::string_view::npos) break;
    rest.remove_prefix(cut + separator.size());
  }
  return "expected " + std::to_string(expected) + " values, got " + std::to_string(count);
}

}  // namespace shuntwright::protocol
