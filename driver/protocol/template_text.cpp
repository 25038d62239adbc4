#include "driver/protocol/template_text.h"

#include <algorithm>
#include <charconv>
#include <cmath>

namespace shuntwright::protocol {

using description::Segment;
using description::TextTemplate;

namespace {

std::string padded(std::string digits, int width) {
  const bool negative = !digits.empty() && digits.front() == '-';
  const std::size_t wanted = static_cast<std::size_t>(width > 0 ? width : 0);
  if (digits.size() < wanted) digits.insert(negative ? 1 : 0, wanted - digits.size(), '0');
  return digits;
}

std::string shortest(double value) {
  char out[64];
  const auto end = std::to_chars(out, out + sizeof out, value, std::chars_format::fixed);
  return end.ec == std::errc() ? std::string(out, end.ptr) : std::to_string(value);
}

Result<std::string> renderField(const Segment& segment, const Value& value) {
  const bool hex = segment.kind == Segment::Kind::hex_upper || segment.kind == Segment::Kind::hex_lower;
  if (const auto* text = std::get_if<std::string_view>(&value.value)) return std::string(*text);
  long long whole = 0;
  if (const auto* real = std::get_if<double>(&value.value)) {
    if (!std::isfinite(*real)) {
      return fail(ErrorCode::bad_use, "the value for {" + segment.text + "} is not a finite number");
    }
    const bool isWhole = *real == std::floor(*real) && std::fabs(*real) < 9e15;
    if (!isWhole && hex) {
      return fail(ErrorCode::bad_use, "{" + segment.text + "} takes whole numbers, got " + shortest(*real));
    }
    if (!isWhole) return padded(shortest(*real), segment.width);
    whole = static_cast<long long>(*real);
  } else {
    whole = std::get<long long>(value.value);
  }
  if (hex && whole < 0) {
    return fail(ErrorCode::bad_use,
                "{" + segment.text + "} takes numbers from 0 on, got " + std::to_string(whole));
  }
  char out[32];
  const auto end = std::to_chars(out, out + sizeof out, whole, hex ? 16 : 10);
  std::string digits(out, end.ptr);
  if (segment.kind == Segment::Kind::hex_upper) {
    for (char& c : digits) c = c >= 'a' && c <= 'f' ? static_cast<char>(c - 'a' + 'A') : c;
  }
  return padded(std::move(digits), segment.width);
}

bool isDigitOf(Segment::Kind kind, char c) {
  if (c >= '0' && c <= '9') return true;
  if (kind == Segment::Kind::decimal) return false;
  return (c >= 'a' && c <= 'f') || (c >= 'A' && c <= 'F');
}

bool isNumber(Segment::Kind kind) {
  return kind == Segment::Kind::decimal || kind == Segment::Kind::hex_upper ||
         kind == Segment::Kind::hex_lower;
}

/// Digits at the front; with a width, exactly that many when more follow directly.
std::size_t digitsAtFront(const Segment& segment, std::string_view rest) {
  std::size_t n = segment.kind == Segment::Kind::decimal && rest.starts_with('-') ? 1 : 0;
  const std::size_t sign = n;
  while (n < rest.size() && isDigitOf(segment.kind, rest[n])) ++n;
  return n == sign ? 0 : n;
}

}  // namespace

Result<std::string> render(const TextTemplate& text, std::span<const Value> values) {
  std::string out;
  for (const Segment& segment : text.segments) {
    if (segment.kind == Segment::Kind::literal) {
      out += segment.text;
      continue;
    }
    const Value* found = nullptr;
    for (const Value& value : values) {
      if (value.name == segment.text) found = &value;
    }
    if (!found) {
      return fail(ErrorCode::bad_use, "no value for {" + segment.text + "} of \"" + text.source + "\"",
                  text.place.text());
    }
    auto field = renderField(segment, *found);
    if (!field) {
      field.error().where = text.place.text();
      return field;
    }
    out += *field;
  }
  return out;
}

std::string_view Fields::operator[](std::string_view name) const {
  const Field* field = find(name);
  return field ? field->text : std::string_view();
}

const Fields::Field* Fields::find(std::string_view name) const {
  for (const Field& field : fields_) {
    if (field.segment->text == name) return &field;
  }
  return nullptr;
}

bool match(const TextTemplate& text, std::string_view line, Fields& fields) {
  fields.clear();
  std::string_view rest = line;
  const auto& segments = text.segments;
  for (std::size_t k = 0; k < segments.size(); ++k) {
    const Segment& segment = segments[k];
    if (segment.kind == Segment::Kind::literal) {
      if (!rest.starts_with(segment.text)) return false;
      rest.remove_prefix(segment.text.size());
      continue;
    }
    const Segment* next = k + 1 < segments.size() ? &segments[k + 1] : nullptr;
    std::size_t length = rest.size();
    if (isNumber(segment.kind)) {
      length = digitsAtFront(segment, rest);
      if (next && next->kind != Segment::Kind::literal && segment.width > 0) {
        length = std::min(length, static_cast<std::size_t>(segment.width));
      }
      if (length == 0) return false;
    } else if (next && next->kind == Segment::Kind::literal) {
      const bool last = k + 2 == segments.size();
      if (last) {
        if (!rest.ends_with(next->text)) return false;
        length = rest.size() - next->text.size();
      } else {
        length = rest.find(next->text);
        if (length == std::string_view::npos) return false;
      }
    } else if (next) {
      length = 0;  // nothing says where it ends
    }
    fields.add(segment, rest.substr(0, length));
    rest.remove_prefix(length);
  }
  return rest.empty();
}

}  // namespace shuntwright::protocol
