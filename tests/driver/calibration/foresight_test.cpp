#include "driver/calibration/foresight.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>

#include "tests/support/virtual_bench.h"

namespace shuntwright::calibration {
namespace {

using namespace units;

TEST(Foresight, theBudgetForeseenIsTheOneThatACalibrationFinds) {
  auto rack = test::shippedRack("gantry_beam.toml");
  test::VirtualBench bench(rack);
  const auto record = bench.calibrate();
  ASSERT_TRUE(record.has_value()) << record.error().text();
  for (const auto& channel : bench.rack.channels) {
    if (channel.shunts.empty()) continue;
    const auto foreseen = foresee(bench.rack, channel);
    ASSERT_TRUE(foreseen.has_value()) << channel.name << ": " << foreseen.error().text();
    // What is not foreseen: noise, and a bridge that is not quite balanced.
    const double found = record->channel(channel.name)->budget.expandedUncertainty_percent;
    EXPECT_NEAR(foreseen->budget.expandedUncertainty_percent / found, 1, 0.1) << channel.name;
    EXPECT_FALSE(foreseen->largest.empty());
  }
}

// A tab shunt on a gauge known to tolerance alone, with an unbalance that is standing strain and so says nothing of the
// gauge: the shunt stands for a strain in proportion to the gauge's resistance, so 0.5 % of gauge is 0.5 % of scale.
TEST(Foresight, anUnmeasuredGaugeUnderATabShuntIsToBeMeasured) {
  auto rack = test::shippedRack("small_bench.toml");
  auto& channel = *std::find_if(rack.channels.begin(), rack.channels.end(), [](const auto& c) {
    return c.circuit == description::CircuitKind::quarter_3_wire && !c.shunts.empty();
  });
  channel.measuredResistance.reset();
  rack.gauges.at(channel.gauge).resistance.tolerance = 0.5 * percent;
  channel.leadLoss = description::LeadLoss::in_prediction;
  channel.unbalance = description::Unbalance::standing_strain;
  channel.shunts.resize(1);
  channel.shunts[0].across = {description::Terminal::sig_plus, description::Terminal::exc_minus};
  channel.shunts[0].side = description::Side::gauge;
  const auto foreseen = foresee(rack, channel);
  ASSERT_TRUE(foreseen.has_value()) << foreseen.error().text();
  EXPECT_EQ(foreseen->largest, "gauge resistance of arm 1");
  ASSERT_TRUE(foreseen->advice.has_value());
  EXPECT_EQ(foreseen->advice->what, "measure each gauge to 0.02 %");
  EXPECT_GT(foreseen->budget.expandedUncertainty_percent, 0.4);
  EXPECT_LT(foreseen->advice->to_percent, 0.5 * foreseen->budget.expandedUncertainty_percent);
}

TEST(Foresight, aMonteCarloOfTheSameMeasurementAgrees) {
  const auto rack = test::shippedRack("gantry_beam.toml");
  Random random(3);
  for (const char* name : {"S01", "S24", "B1", "F1"}) {
    const auto& channel = *rack.channel(name);
    const auto foreseen = foresee(rack, channel);
    ASSERT_TRUE(foreseen.has_value());
    const auto second = secondOpinion(rack, channel, foreseen->budget, random);
    ASSERT_TRUE(second.has_value()) << second.error().text();
    EXPECT_TRUE(second->agrees) << name << ": " << second->interval.low << " .. " << second->interval.high;
    // A budget half as wide is contradicted.
    Budget narrow = foreseen->budget;
    narrow.expandedUncertainty_percent /= 2;
    EXPECT_FALSE(secondOpinion(rack, channel, narrow, random)->agrees);
  }
}

TEST(Foresight, aChannelWithoutShuntsHasNoCalibrationToForesee) {
  auto rack = test::shippedRack("small_bench.toml");
  rack.channels[0].shunts.clear();
  EXPECT_EQ(foresee(rack, rack.channels[0]).error().code, ErrorCode::bad_use);
}

}  // namespace
}  // namespace shuntwright::calibration
