#include "driver/description/text_template.h"

#include <algorithm>
#include <charconv>

#include "driver/description/diagnostics.h"
#include "driver/description/toml_reader.h"

namespace shuntwright::description {
namespace {

constexpr int kWidestNumber = 20;

std::string inQuotes(std::string_view text) {
  return '"' + std::string(text) + '"';
}

/// "relay:02", "mask:08X", "values:,", "text". Returns what is wrong, or an empty string.
std::string parseField(std::string_view text, Segment& out) {
  const auto colon = text.find(':');
  out.text = std::string(text.substr(0, colon));
  out.kind = Segment::Kind::text;
  if (colon == std::string_view::npos)
    return out.text == "values" ? "a list needs its separator: {values:,}" : std::string();

  std::string_view format = text.substr(colon + 1);
  if (out.text == "values") {
    out.kind = Segment::Kind::list;
    out.separator = std::string(format);
    return format.empty() ? "a list needs its separator: {values:,}" : std::string();
  }
  out.kind = Segment::Kind::decimal;
  if (format.ends_with('x') || format.ends_with('X')) {
    out.kind = format.back() == 'X' ? Segment::Kind::hex_upper : Segment::Kind::hex_lower;
    format.remove_suffix(1);
  }
  if (format.empty() && out.kind != Segment::Kind::decimal) return {};
  const auto [end, problem] = std::from_chars(format.data(), format.data() + format.size(), out.width);
  if (problem != std::errc() || end != format.data() + format.size() || out.width < 0 ||
      out.width > kWidestNumber)
    return "the format of a number is its width, up to 20, padded with zeros, and x or X for hexadecimal: {" +
           out.text + ":02} or {" + out.text + ":08X}";
  return {};
}

}  // namespace

bool TextTemplate::hasField(std::string_view field) const {
  return std::ranges::any_of(segments, [&](const Segment& segment) {
    return segment.kind != Segment::Kind::literal && segment.text == field;
  });
}

TextTemplate parseTemplate(std::string source, Place place, const std::vector<std::string_view>& allowed,
                           Diagnostics& diagnostics) {
  TextTemplate out;
  out.source = std::move(source);
  out.place = std::move(place);
  const std::string_view text = out.source;

  std::string literal;
  const auto endLiteral = [&] {
    if (!literal.empty()) out.segments.push_back({Segment::Kind::literal, std::move(literal), 0, {}});
    literal.clear();
  };
  for (std::size_t i = 0; i < text.size(); ++i) {
    const char c = text[i];
    if (c != '{' && c != '}') {
      literal += c;
      continue;
    }
    if (i + 1 < text.size() && text[i + 1] == c) {
      literal += c;
      ++i;
      continue;
    }
    const auto close = c == '{' ? text.find('}', i) : std::string_view::npos;
    if (close == std::string_view::npos) {
      diagnostics.error(out.place, inQuotes(text) + " has an unmatched " + inQuotes(std::string(1, c)),
                        "write " + inQuotes(std::string(2, c)) + " for the brace itself");
      return out;
    }
    endLiteral();
    Segment field;
    const std::string_view inside = text.substr(i + 1, close - i - 1);
    const std::string wrong = parseField(inside, field);
    if (std::ranges::find(allowed, field.text) == allowed.end()) {
      diagnostics.error(out.place, "unknown field {" + field.text + "} in " + inQuotes(text),
                        allowed.empty() ? "no field has a meaning here; write {{ and }} for braces themselves"
                                        : suggestion(field.text, allowed));
    } else if (!wrong.empty()) {
      diagnostics.error(out.place, "{" + std::string(inside) + "} in " + inQuotes(text) + " cannot be read",
                        wrong);
    }
    out.segments.push_back(std::move(field));
    i = close;
  }
  endLiteral();
  return out;
}

}  // namespace shuntwright::description
