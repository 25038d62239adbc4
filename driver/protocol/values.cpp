#include "driver/protocol/values.h"

#include <algorithm>
#include <charconv>
#include <cmath>
#include <limits>

#include "driver/core/bytes.h"

namespace shuntwright::protocol {

namespace {

// Powers of ten that a double holds exactly.
constexpr double kPowers[] = {1e0,  1e1,  1e2,  1e3,  1e4,  1e5,  1e6,  1e7,  1e8,  1e9,  1e10, 1e11,
                              1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22};
constexpr std::uint64_t kExact = std::uint64_t{1} << 53;

bool isDigit(char c) {
  return static_cast<unsigned char>(c - '0') < 10;
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
  // Sign, digits and a point, few enough digits: integer and power of ten are exact, so the one division is
  // the only rounding and the result is the same as from_chars gives.
  const char* c = p;
  bool negative = false;
  if (c != end && (*c == '-' || *c == '+')) negative = *c++ == '-';
  std::uint64_t digits = 0;
  const char* first = c;
  while (c != end && isDigit(*c)) digits = digits * 10 + static_cast<std::uint64_t>(*c++ - '0');
  std::size_t count = static_cast<std::size_t>(c - first);
  std::size_t decimals = 0;
  if (c != end && *c == '.') {
    const char* point = ++c;
    while (c != end && isDigit(*c)) digits = digits * 10 + static_cast<std::uint64_t>(*c++ - '0');
    decimals = static_cast<std::size_t>(c - point);
    count += decimals;
  }
  const bool exponent = c != end && (*c == 'e' || *c == 'E');
  if (count == 0 || count > 18 || digits > kExact || exponent) return readAnyDecimal(p, end, value);
  const double magnitude = static_cast<double>(digits) / kPowers[decimals];
  value = negative ? -magnitude : magnitude;
  p = c;
  return true;
}

ValueFormat::ValueFormat(const description::Inputs& inputs)
    : scale(scaleOf(inputs.gives)),
      fullScale(static_cast<float>(inputs.fullScale.in(units::volt_per_volt))),
      saturated(inputs.saturated),
      missing(inputs.missing) {
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
  const char* p = list.data();
  const char* const end = p + list.size();
  const bool blanks = separator.empty() || separator.front() != ' ';
  for (std::size_t i = 0; i < ratio.size(); ++i) {
    if (i > 0) {
      if (static_cast<std::size_t>(end - p) < separator.size() ||
          std::string_view(p, separator.size()) != separator) {
        return false;
      }
      p += separator.size();
    }
    while (blanks && p != end && *p == ' ') ++p;
    double value = 0;
    const char* const start = p;
    const bool number = readDecimal(p, end, value);
    while (blanks && p != end && *p == ' ') ++p;
    const bool whole =
        p == end || std::string_view(p, static_cast<std::size_t>(end - p)).starts_with(separator);
    const bool isWord = number && format.numericWords && isListed(format, tokenAt(start, end, separator));
    if (number && whole && !isWord) {
      const float v = static_cast<float>(value * format.scale);
      ratio[i] = v;
      flags[i] = format.fullScale > 0 && std::fabs(v) >= format.fullScale ? kValueSaturated : 0;
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
      p = word.empty() ? start : word.data() + word.size();
      while (blanks && p != end && *p == ' ') ++p;
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
