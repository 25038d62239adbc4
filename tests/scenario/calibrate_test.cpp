// proves P-06
#include "driver/calibration/calibrate.h"

#include <gtest/gtest.h>

#include <cmath>

#include "driver/calibration/record_json.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright {
namespace {

using test::shippedRack;
using test::VirtualBench;

TEST(Calibrate, aHealthySmallBenchPasses) {
  VirtualBench world(shippedRack("small_bench.toml"));
  auto record = world.calibrate();
  ASSERT_TRUE(record.has_value()) << record.error().text();
  for (const auto& channel : record->channels) {
    EXPECT_EQ(channel.verdict, calibration::Verdict::pass) << channel.name;
    for (const auto& f : channel.findings) ADD_FAILURE() << channel.name << " " << f.code << ": " << f.evidence;
    const auto truth = world.bench->truth(channel.name, world.clock.now());
    EXPECT_NEAR(channel.spanRatio / truth.amplifierSpan, 1, 0.05) << channel.name;
  }
  EXPECT_TRUE(world.bench->closedRelays().empty());
}

TEST(Calibrate, theSameSeedGivesTheSameRecordToTheByte) {
  VirtualBench one(shippedRack("small_bench.toml"), {}, 42), two(shippedRack("small_bench.toml"), {}, 42),
      other(shippedRack("small_bench.toml"), {}, 43);
  auto a = one.calibrate(), b = two.calibrate(), c = other.calibrate();
  ASSERT_TRUE(a && b && c);
  EXPECT_EQ(calibration::recordJson(*a), calibration::recordJson(*b));
  EXPECT_NE(calibration::recordJson(*a), calibration::recordJson(*c));
}

}  // namespace
}  // namespace shuntwright
