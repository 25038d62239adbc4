#include "sim/wire/text_line.h"

#include <charconv>
#include <cstdint>
#include <cstdio>

namespace shuntwright::sim {

using description::Checksum;
using description::Segment;

namespace {

bool allDigits(std::string_view text, bool hexadecimal) {
  if (text.empty()) return false;
  for (const char c : text) {
    const bool digit = c >= '0' && c <= '9';
    const bool letter = (c >= 'A' && c <= 'F') || (c >= 'a' && c <= 'f');
    if (!digit && !(hexadecimal && letter)) return false;
  }
  return true;
}

/// Tries to read segments from `index` on; a field takes the shortest text that lets the rest fit.
bool readFrom(const std::vector<Segment>& segments, std::size_t index, std::string_view line, FieldTexts& out) {
  if (index == segments.size()) return line.empty();
  const Segment& segment = segments[index];
  if (segment.kind == Segment::Kind::literal) {
    return line.starts_with(segment.text) && readFrom(segments, index + 1, line.substr(segment.text.size()), out);
  }
  for (std::size_t length = 0; length <= line.size(); ++length) {
    const std::string_view part = line.substr(0, length);
    const bool hexadecimal = segment.kind == Segment::Kind::hex_upper || segment.kind == Segment::Kind::hex_lower;
    if ((hexadecimal || segment.kind == Segment::Kind::decimal) && !allDigits(part, hexadecimal)) continue;
    if (readFrom(segments, index + 1, line.substr(length), out)) {
      std::string text(part);
      if (hexadecimal) {
        std::uint64_t value = 0;
        std::from_chars(part.data(), part.data() + part.size(), value, 16);
        text = std::to_string(value);
      }
      out[segment.text] = text;
      return true;
    }
  }
  return false;
}

void addNumber(std::string& line, const Segment& segment, std::string_view decimal) {
  std::uint64_t value = 0;
  std::from_chars(decimal.data(), decimal.data() + decimal.size(), value);
  char text[72];
  const char* form = segment.kind == Segment::Kind::hex_upper   ? "%0*llX"
                     : segment.kind == Segment::Kind::hex_lower ? "%0*llx"
                                                                : "%0*llu";
  const int size = std::snprintf(text, sizeof text, form, segment.width, static_cast<unsigned long long>(value));
  line.append(text, static_cast<std::size_t>(size));
}

std::uint16_t crc16(std::string_view text, std::uint16_t start, bool reflected) {
  std::uint16_t crc = start;
  for (const char c : text) {
    const auto byte = static_cast<std::uint8_t>(c);
    if (reflected) {
      crc = static_cast<std::uint16_t>(crc ^ byte);
      for (int bit = 0; bit < 8; ++bit) crc = static_cast<std::uint16_t>((crc & 1) ? (crc >> 1) ^ 0xA001 : crc >> 1);
    } else {
      crc = static_cast<std::uint16_t>(crc ^ (byte << 8));
      for (int bit = 0; bit < 8; ++bit) {
        crc = static_cast<std::uint16_t>((crc & 0x8000) ? (crc << 1) ^ 0x1021 : crc << 1);
      }
    }
  }
  return crc;
}

std::string digits(const Checksum& checksum, std::string_view line) {
  unsigned value = 0;
  int width = 2;
  switch (checksum.kind) {
    case Checksum::Kind::none: return {};
    case Checksum::Kind::sum8:
      for (const char c : line) value = (value + static_cast<std::uint8_t>(c)) & 0xff;
      break;
    case Checksum::Kind::xor8:
      for (const char c : line) value ^= static_cast<std::uint8_t>(c);
      break;
    case Checksum::Kind::crc16_modbus:
      value = crc16(line, 0xffff, true);
      width = 4;
      break;
    case Checksum::Kind::crc16_ccitt_false:
      value = crc16(line, 0xffff, false);
      width = 4;
      break;
  }
  std::string text(static_cast<std::size_t>(width), '0');
  for (int k = width; k-- > 0; value >>= 4) text[static_cast<std::size_t>(k)] = "0123456789ABCDEF"[value & 15];
  return text;
}

}  // namespace

std::optional<FieldTexts> readLine(const description::TextTemplate& form, std::string_view line) {
  FieldTexts fields;
  if (!readFrom(form.segments, 0, line, fields)) return std::nullopt;
  return fields;
}

std::string writeLine(const description::TextTemplate& form, const FieldTexts& fields) {
  std::string line;
  for (const Segment& segment : form.segments) {
    if (segment.kind == Segment::Kind::literal) {
      line += segment.text;
      continue;
    }
    const auto found = fields.find(segment.text);
    const std::string_view text = found == fields.end() ? std::string_view() : std::string_view(found->second);
    const bool isNumber = segment.kind != Segment::Kind::text && segment.kind != Segment::Kind::list;
    if (isNumber) {
      addNumber(line, segment, text);
    } else {
      line += text;
    }
  }
  return line;
}

std::string sealed(const Checksum& checksum, std::string line) {
  if (checksum.kind == Checksum::Kind::none) return line;
  const std::string sum = digits(checksum, line);
  return line + checksum.separator + sum;
}

std::optional<std::string_view> unsealed(const Checksum& checksum, std::string_view line) {
  if (checksum.kind == Checksum::Kind::none) return line;
  const std::size_t tail = checksum.separator.size() + (checksum.kind == Checksum::Kind::sum8 || checksum.kind == Checksum::Kind::xor8 ? 2 : 4);
  if (line.size() < tail) return std::nullopt;
  const std::string_view body = line.substr(0, line.size() - tail);
  if (line.substr(body.size()) != checksum.separator + digits(checksum, body)) return std::nullopt;
  return body;
}

}  // namespace shuntwright::sim
