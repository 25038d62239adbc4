#include "driver/core/error.h"

#include <gtest/gtest.h>

#include "driver/core/bytes.h"
#include "driver/core/random.h"

namespace shuntwright {
namespace {

TEST(Error, PrintsPlaceMessageCausesAndTheInnermostRemedy) {
  Error inner(ErrorCode::timeout, "nothing came", "tcp:10.0.0.7:5025", "switch it on");
  const Error outer = std::move(inner).wrap("the device cannot be reached", "device amp1");
  EXPECT_EQ(outer.code, ErrorCode::timeout);
  EXPECT_EQ(outer.text(),
            "device amp1: the device cannot be reached\n  because: tcp:10.0.0.7:5025: nothing came\n"
            "  remedy: switch it on");
}

TEST(Place, PrintsWhatIsKnown) {
  EXPECT_EQ((Place{"a.toml", 3, 7}.text()), "a.toml:3:7");
  EXPECT_EQ((Place{"a.toml", 3, 0}.text()), "a.toml:3");
  EXPECT_EQ((Place{"a.toml", 0, 7}.text()), "a.toml");
}

TEST(Quoted, EscapesWhatCannotBeSeen) {
  EXPECT_EQ(quoted(std::string_view("a\r\n\t\"\\\x00\x7f\xff", 9)), "\"a\\r\\n\\t\\\"\\\\\\x00\\x7f\\xff\"");
  EXPECT_EQ(quoted(std::string_view("abcdef"), 3), "\"abc\"... (6 bytes)");
}

TEST(Random, RepeatsFromItsSeed) {
  Random a(42), b(42), c(43);
  for (int k = 0; k < 100; ++k) {
    const auto x = a.bits();
    EXPECT_EQ(x, b.bits());
    EXPECT_NE(x, c.bits());
  }
  Random parent(7);
  Random before = parent.fork(3);
  parent.bits();
  Random after = parent.fork(3);
  EXPECT_EQ(before.bits(), after.bits()) << "a fork does not depend on what was drawn";
  EXPECT_NE(parent.fork(3).bits(), parent.fork(4).bits());
}

// A normal deviate has mean 0 and variance 1; with 1e6 draws the mean's standard deviation is 1e-3, that of
// the variance sqrt(2) 1e-3: five of them are allowed.
TEST(Random, NormalHasMeanZeroAndVarianceOne) {
  Random random(1);
  double sum = 0, squares = 0;
  constexpr int kDraws = 1'000'000;
  for (int k = 0; k < kDraws; ++k) {
    const double x = random.normal();
    sum += x;
    squares += x * x;
  }
  EXPECT_NEAR(sum / kDraws, 0, 5e-3);
  EXPECT_NEAR(squares / kDraws, 1, 7.1e-3);
}

TEST(Random, BelowIsEven) {
  Random random(5);
  int counts[7] = {};
  for (int k = 0; k < 70'000; ++k) ++counts[random.below(7)];
  for (const int count : counts) EXPECT_NEAR(count, 10'000, 5 * 93) << "binomial, five standard deviations";
}

}  // namespace
}  // namespace shuntwright
