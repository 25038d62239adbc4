#pragma once

#include <string>
#include <string_view>
#include <vector>

#include "driver/core/error.h"

namespace shuntwright::description {

class Diagnostics;

/// One piece of a text template: literal text, or a field in braces.
///
/// In a profile a request or answer is written as it goes over the wire, with fields in braces:
///     "CLOSE {relay:02}"      decimal, padded with zeros to 2 digits
///     "MASK {mask:08X}"       hexadecimal, padded, upper case (x: lower case)
///     "DATA {counter},{values:,}"   a list with its separator (one or more characters)
///     "{{" and "}}"           stand for a single brace
/// Plain fields take the shortest text up to the next literal.
struct Segment {
  enum class Kind { literal, text, decimal, hex_upper, hex_lower, list };
  Kind kind = Kind::literal;
  std::string text;       ///< the literal, or the field's name
  int width = 0;          ///< zero-padded width of decimal and hex, 0 = as long as it needs
  std::string separator;  ///< of a list
};

struct TextTemplate {
  std::string source;  ///< as written in the profile
  Place place;
  std::vector<Segment> segments;

  bool hasField(std::string_view field) const;
};

/// Splits a template into segments. Names that are not in `allowed` are reported with a suggestion.
TextTemplate parseTemplate(std::string source, Place place, const std::vector<std::string_view>& allowed,
                           Diagnostics& diagnostics);

}  // namespace shuntwright::description
