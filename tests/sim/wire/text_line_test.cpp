#include "sim/wire/text_line.h"

#include <gtest/gtest.h>

namespace shuntwright::sim {
namespace {

using description::Checksum;

// Check values of "123456789" in the public catalogue of CRC algorithms: CRC-16/MODBUS 4B37, CRC-16/IBM-3740
// (CCITT-FALSE) 29B1. Sum and exclusive-or by hand.
TEST(Sealed, publishedCheckValues) {
  const auto tail = [](Checksum::Kind kind) { return sealed({kind, "*"}, "123456789").substr(10); };
  EXPECT_EQ(tail(Checksum::Kind::crc16_modbus), "4B37");
  EXPECT_EQ(tail(Checksum::Kind::crc16_ccitt_false), "29B1");
  EXPECT_EQ(tail(Checksum::Kind::sum8), "DD");
  EXPECT_EQ(tail(Checksum::Kind::xor8), "31");
}

TEST(Unsealed, takesOnlyTheRightCheckSum) {
  const Checksum checksum{Checksum::Kind::xor8, "*"};
  const std::string line = sealed(checksum, "RD 01 16");
  EXPECT_EQ(unsealed(checksum, line), "RD 01 16");
  std::string wrong = line;
  wrong[0] = 'S';
  EXPECT_FALSE(unsealed(checksum, wrong).has_value());
  EXPECT_FALSE(unsealed(checksum, "").has_value());
}

}  // namespace
}  // namespace shuntwright::sim
