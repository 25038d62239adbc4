#include "driver/protocol/checksum.h"

#include <gtest/gtest.h>

#include "split.h"

namespace shuntwright::protocol {
namespace {

using description::Checksum;

// Check values of the RevEng catalogue of parametrised CRC algorithms, for the text "123456789".
TEST(Checksum, AgreesWithTheCatalogueOfCrcAlgorithms) {
  EXPECT_EQ(crc16Modbus("123456789"), 0x4B37);
  EXPECT_EQ(crc16CcittFalse("123456789"), 0x29B1);
}

// Frames printed in "MODBUS over serial line" V1.02 and "MODBUS application protocol" V1.1b3: the CRC follows
// with its low byte first.
TEST(Checksum, AgreesWithPrintedModbusFrames) {
  using namespace std::string_view_literals;
  EXPECT_EQ(crc16Modbus("\x02\x07"sv), 0x1241);
  EXPECT_EQ(crc16Modbus("\x01\x03\x00\x6B\x00\x03"sv), 0x1774);
  EXPECT_EQ(crc16Modbus("\x01\x03\x06\x02\x2B\x00\x00\x00\x64"sv), 0x7A05);
}

// Worked by hand: 41h + 42h + FFh = 182h; 41h ^ 42h ^ FFh = FCh.
TEST(Checksum, SumAndExclusiveOrAreThoseOfTheirNames) {
  EXPECT_EQ(sum8("AB\xFF"), 0x82);
  EXPECT_EQ(xor8("AB\xFF"), 0xFC);
  EXPECT_EQ(sum8(""), 0);
  EXPECT_EQ(xor8(""), 0);
}

std::string with(Checksum::Kind kind, std::string text) {
  appendChecksum({kind, "*"}, text);
  return text;
}

TEST(Checksum, IsAppendedInUpperCaseHexadecimalAndTakenOffAgain) {
  EXPECT_EQ(with(Checksum::Kind::crc16_modbus, "123456789"), "123456789*4B37");
  EXPECT_EQ(with(Checksum::Kind::crc16_ccitt_false, "123456789"), "123456789*29B1");
  EXPECT_EQ(with(Checksum::Kind::xor8, "AB"), "AB*03");
  EXPECT_EQ(with(Checksum::Kind::none, "AB"), "AB");
  EXPECT_EQ(stripChecksum({Checksum::Kind::crc16_modbus, "*"}, "123456789*4b37"), "123456789");
  EXPECT_EQ(stripChecksum({Checksum::Kind::none, "*"}, "AB*03"), "AB*03");
  EXPECT_EQ(stripChecksum({Checksum::Kind::xor8, ""}, "AB03"), "AB");
}

TEST(Checksum, FindsEveryFlippedBitAndEveryMissingByte) {
  for (const auto kind : {Checksum::Kind::sum8, Checksum::Kind::xor8, Checksum::Kind::crc16_modbus,
                          Checksum::Kind::crc16_ccitt_false}) {
    const std::string line = with(kind, "RD 0.125,-0.003");
    test::everyDamage(line, [&](const std::string& damaged) {
      const auto stripped = stripChecksum({kind, "*"}, damaged);
      // The case of a digit carries nothing.
      std::string upper = damaged;
      for (char& c : upper) c = static_cast<char>(std::toupper(static_cast<unsigned char>(c)));
      if (upper == line) return;
      EXPECT_FALSE(stripped) << damaged;
    });
  }
}

TEST(Checksum, SaysWhatItExpectedAndWhatCame) {
  const auto wrong = stripChecksum({Checksum::Kind::xor8, "*"}, "AB*04");
  ASSERT_FALSE(wrong);
  EXPECT_EQ(wrong.error().code, ErrorCode::bad_answer);
  EXPECT_EQ(wrong.error().message, "wrong check sum in \"AB*04\": expected 03, got \"04\"");
  EXPECT_EQ(stripChecksum({Checksum::Kind::xor8, "*"}, "AB").error().message,
            "no check sum at the end of \"AB\"");
}

}  // namespace
}  // namespace shuntwright::protocol
