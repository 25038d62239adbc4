#include "driver/protocol/checksum.h"

#include <array>
#include <charconv>
#include <cstdio>

#include "driver/core/bytes.h"

namespace shuntwright::protocol {

using description::Checksum;

namespace {

constexpr std::array<std::uint16_t, 256> kModbusTable = [] {
  std::array<std::uint16_t, 256> table{};
  for (unsigned i = 0; i < 256; ++i) {
    unsigned crc = i;
    for (int bit = 0; bit < 8; ++bit) crc = (crc & 1) ? (crc >> 1) ^ 0xA001u : crc >> 1;
    table[i] = static_cast<std::uint16_t>(crc);
  }
  return table;
}();

constexpr std::array<std::uint16_t, 256> kCcittTable = [] {
  std::array<std::uint16_t, 256> table{};
  for (unsigned i = 0; i < 256; ++i) {
    unsigned crc = i << 8;
    for (int bit = 0; bit < 8; ++bit) crc = (crc & 0x8000) ? (crc << 1) ^ 0x1021u : crc << 1;
    table[i] = static_cast<std::uint16_t>(crc);
  }
  return table;
}();

std::size_t digits(Checksum::Kind kind) {
  switch (kind) {
    case Checksum::Kind::none:
      return 0;
    case Checksum::Kind::sum8:
    case Checksum::Kind::xor8:
      return 2;
    case Checksum::Kind::crc16_modbus:
    case Checksum::Kind::crc16_ccitt_false:
      return 4;
  }
  return 0;
}

unsigned valueOf(Checksum::Kind kind, std::string_view text) {
  switch (kind) {
    case Checksum::Kind::none:
      return 0;
    case Checksum::Kind::sum8:
      return sum8(text);
    case Checksum::Kind::xor8:
      return xor8(text);
    case Checksum::Kind::crc16_modbus:
      return crc16Modbus(text);
    case Checksum::Kind::crc16_ccitt_false:
      return crc16CcittFalse(text);
  }
  return 0;
}

std::string hex(unsigned value, std::size_t width) {
  char out[16];
  std::snprintf(out, sizeof out, "%0*X", static_cast<int>(width), value);
  return out;
}

}  // namespace

std::uint8_t sum8(std::string_view text) {
  unsigned sum = 0;
  for (const char c : text) sum += static_cast<unsigned char>(c);
  return static_cast<std::uint8_t>(sum);
}

std::uint8_t xor8(std::string_view text) {
  unsigned sum = 0;
  for (const char c : text) sum ^= static_cast<unsigned char>(c);
  return static_cast<std::uint8_t>(sum);
}

std::uint16_t crc16Modbus(std::string_view text) {
  unsigned crc = 0xFFFF;
  for (const char c : text) crc = (crc >> 8) ^ kModbusTable[(crc ^ static_cast<unsigned char>(c)) & 0xFF];
  return static_cast<std::uint16_t>(crc);
}

std::uint16_t crc16CcittFalse(std::string_view text) {
  unsigned crc = 0xFFFF;
  for (const char c : text) {
    crc = ((crc << 8) ^ kCcittTable[((crc >> 8) ^ static_cast<unsigned char>(c)) & 0xFF]) & 0xFFFF;
  }
  return static_cast<std::uint16_t>(crc);
}

void appendChecksum(const Checksum& how, std::string& text) {
  if (how.kind == Checksum::Kind::none) return;
  const std::string sum = hex(valueOf(how.kind, text), digits(how.kind));
  text += how.separator;
  text += sum;
}

Result<std::string_view> stripChecksum(const Checksum& how, std::string_view line) {
  if (how.kind == Checksum::Kind::none) return line;
  const std::size_t width = digits(how.kind);
  const std::size_t tail = width + how.separator.size();
  if (line.size() < tail || line.substr(line.size() - tail, how.separator.size()) != how.separator) {
    return fail(ErrorCode::bad_answer, "no check sum at the end of " + quoted(line));
  }
  const std::string_view text = line.substr(0, line.size() - tail);
  const std::string_view came = line.substr(line.size() - width);
  unsigned value = 0;
  const auto read = std::from_chars(came.data(), came.data() + came.size(), value, 16);
  const unsigned expected = valueOf(how.kind, text);
  if (read.ec != std::errc() || read.ptr != came.data() + came.size() || value != expected) {
    return fail(ErrorCode::bad_answer, "wrong check sum in " + quoted(line) + ": expected " +
                                           hex(expected, width) + ", got " + quoted(came));
  }
  return text;
}

}  // namespace shuntwright::protocol
