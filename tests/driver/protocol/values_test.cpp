#include "driver/protocol/values.h"

#include <gtest/gtest.h>
#include <charconv>
#include <cmath>
#include <cstring>

#include "driver/core/random.h"

namespace shuntwright::protocol {
namespace {

double fromChars(const std::string& text) {
  const char* begin = text.c_str() + (text.starts_with('+') ? 1 : 0);
  double value = NAN;
  std::from_chars(begin, text.c_str() + text.size(), value);
  return value;
}

::testing::AssertionResult agrees(const std::string& text) {
  const char* p = text.data();
  double value = NAN;
  if (!readDecimal(p, text.data() + text.size(), value))
    return ::testing::AssertionFailure() << text << " was refused";
  if (p != text.data() + text.size())
    return ::testing::AssertionFailure() << text << " was not read to its end";
  const double expected = fromChars(text);
  if (std::memcmp(&value, &expected, sizeof value) == 0) return ::testing::AssertionSuccess();
  return ::testing::AssertionFailure() << text << ": " << value << " instead of " << expected;
}

// The standard library's std::from_chars is correctly rounded; ours must give the same bits.
TEST(ReadDecimal, GivesTheBitsOfFromChars) {
  for (const char* text :
       {"0", "-0", "+0.0", "1.", ".5", "-.25", "123456.789", "0.1", "0.30000000000000004", "9007199254740992",
        "9007199254740993", "123456789012345678", "1234567890123456789", "0.0000000000000000000001", "1e5",
        "-1.5E-3", "4.9e-324", "1.7976931348623157e308", "00000000000000000000000001.5"}) {
    EXPECT_TRUE(agrees(text));
  }
  Random random(1);
  for (int k = 0; k < 200'000; ++k) {
    char text[64];
    const int decimals = static_cast<int>(random.below(12));
    std::snprintf(text, sizeof text, "%+.*f", decimals,
                  random.normal() * std::pow(10, random.uniform(-6, 9)));
    ASSERT_TRUE(agrees(text));
  }
}

TEST(ReadDecimal, RefusesWhatIsNoFiniteNumber) {
  for (const std::string text :
       {"", "-", "+", ".", "-.", "nan", "inf", "-inf", "+nan", "--1", "+-1", "x", " 1", "e5", "1e999"}) {
    const char* p = text.data();
    double value = 7;
    EXPECT_FALSE(readDecimal(p, text.data() + text.size(), value)) << text;
    EXPECT_EQ(p, text.data());
    EXPECT_EQ(value, 7);
  }
}

class ReadValues : public ::testing::Test {
 protected:
  ReadValues() {
    inputs.gives = description::ValueUnit::millivolt_per_volt;
    inputs.fullScale = 4.0 * units::millivolt_per_volt;
    inputs.saturated = {"OVR", "-OVR"};
    inputs.missing = {"NC", "9.91E37"};
  }
  bool read(std::string_view list, std::size_t count, std::string_view separator = ",") {
    ratio.assign(count, -1);
    flags.assign(count, 99);
    return readValues(ValueFormat(inputs), list, separator, ratio, flags);
  }
  description::Inputs inputs;
  std::vector<float> ratio;
  std::vector<std::uint8_t> flags;
};

TEST_F(ReadValues, ScalesToVoltsPerVolt) {
  ASSERT_TRUE(read("0.5,-1.25,3e-3", 3));
  EXPECT_EQ(ratio, (std::vector<float>{0.5e-3f, -1.25e-3f, 3e-6f}));
  EXPECT_EQ(flags, (std::vector<std::uint8_t>{0, 0, 0}));
  inputs.gives = description::ValueUnit::microvolt_per_volt;
  ASSERT_TRUE(read("1500.25", 1));
  EXPECT_EQ(ratio[0], 1500.25e-6f);
  inputs.gives = description::ValueUnit::volt_per_volt;
  ASSERT_TRUE(read("0.002", 1));
  EXPECT_EQ(ratio[0], 0.002f);
}

TEST_F(ReadValues, TakesWordsAndFullScaleForFlags) {
  ASSERT_TRUE(read("OVR, NC ,-4.0,9.91E37,-OVR", 5));
  EXPECT_EQ(flags, (std::vector<std::uint8_t>{1, 2, 1, 2, 1}));
  for (const int k : {0, 1, 3, 4}) EXPECT_TRUE(std::isnan(ratio[static_cast<std::size_t>(k)])) << k;
  EXPECT_FLOAT_EQ(ratio[2], -4e-3f);
}

TEST_F(ReadValues, TakesAnySeparatorAndBlanks) {
  EXPECT_TRUE(read("1; 2 ;3", 3, ";"));
  EXPECT_TRUE(read("1 2 3", 3, " "));
  EXPECT_TRUE(read("1, 2, 3", 3, ", "));
  EXPECT_TRUE(read("1<>2", 2, "<>"));
  EXPECT_TRUE(read("  1.5", 1));
}

TEST_F(ReadValues, RefusesAnyOtherNumberOfValues) {
  for (const char* list : {"", "1", "1,2", "1,2,3,4", "1,2,", ",1,2", "1,,2", "1,2,3,", "1;2;3"}) {
    EXPECT_FALSE(read(list, 3)) << list;
  }
}

TEST_F(ReadValues, RefusesWhatIsNeitherNumberNorWord) {
  for (const char* list : {"1,x,3", "1,2.5.5,3", "1,OVRX,3", "1,0x10,3", "1,nan,3", "1,2 2,3", "1,--2,3"}) {
    EXPECT_FALSE(read(list, 3)) << list;
  }
}

TEST_F(ReadValues, SaysWhatIsWrong) {
  const ValueFormat format(inputs);
  EXPECT_EQ(whatIsWrong(format, "1,2", ",", 3), "expected 3 values, got 2");
  EXPECT_EQ(whatIsWrong(format, "1,2,3,4", ",", 3), "expected 3 values, got 4");
  EXPECT_EQ(whatIsWrong(format, "", ",", 3), "expected 3 values, got 0");
  EXPECT_EQ(whatIsWrong(format, "1,2.5.5,3", ",", 3), "value 2 is no number: \"2.5.5\"");
}

}  // namespace
}  // namespace shuntwright::protocol
