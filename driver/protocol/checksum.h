#pragma once

#include <cstdint>
#include <string>
#include <string_view>

#include "driver/core/error.h"
#include "driver/description/profile.h"

namespace shuntwright::protocol {

std::uint8_t sum8(std::string_view text);              ///< sum of all bytes modulo 256
std::uint8_t xor8(std::string_view text);              ///< exclusive or of all bytes
std::uint16_t crc16Modbus(std::string_view text);      ///< poly 8005 reflected, start FFFF (CRC-16/MODBUS)
std::uint16_t crc16CcittFalse(std::string_view text);  ///< poly 1021, start FFFF (CRC-16/IBM-3740)

/// Puts the check sum behind the text: separator and upper-case hexadecimal digits, two for 8 bits, four for
/// 16. Nothing for Kind::none.
void appendChecksum(const description::Checksum& how, std::string& text);

/// The text without its check sum. Errors: bad_answer when it is missing or does not agree; the message says
/// which was expected and which came. Digits of either case are taken.
Result<std::string_view> stripChecksum(const description::Checksum& how, std::string_view line);

}  // namespace shuntwright::protocol
