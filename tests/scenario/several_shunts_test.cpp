// proves P-15
// A channel with several shunts, of both polarities and several values: one line through all of them.
#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>

#include "tests/support/virtual_bench.h"

namespace shuntwright {
namespace {

using namespace units;
using description::Terminal;
using test::VirtualBench;

/// The small bench, its channel Q3 with four shunts of certified resistors on free relays.
description::Rack benchWithShunts() {
  auto rack = test::shippedRack("small_bench.toml");
  auto& channel =
      *std::find_if(rack.channels.begin(), rack.channels.end(), [](const auto& c) { return c.name == "Q3"; });
  description::Resistor certified = rack.resistors.at("RC1");
  certified.tolerance = {};
  certified.expandedUncertainty = 0.01 * percent;
  certified.temperatureSpan = 0.0 * kelvin;
  const description::Shunt first = channel.shunts.front();
  channel.shunts.clear();
  int relay = 10;
  const auto add = [&](const char* name, double kiloohms, Terminal a, Terminal b) {
    certified.name = name;
    certified.value = kiloohms * kiloohm;
    rack.resistors[name] = certified;
    description::Shunt shunt = first;
    shunt.name = shunt.resistor = name;
    shunt.across = {a, b};
    shunt.relay.relay = ++relay;
    channel.shunts.push_back(shunt);
  };
  add("small", 349, Terminal::exc_plus, Terminal::comp);
  add("middle", 174.65, Terminal::exc_plus, Terminal::comp);
  add("large", 87.2, Terminal::exc_plus, Terminal::comp);
  add("other way", 174.65, Terminal::exc_plus, Terminal::sig_minus);
  return rack;
}

calibration::ChannelResult calibrated(const sim::Scenario& scenario, std::uint64_t seed = 1) {
  VirtualBench world(benchWithShunts(), scenario, seed);
  const auto record = world.calibrate();
  EXPECT_TRUE(record.has_value()) << record.error().text();
  EXPECT_TRUE(world.bench->closedRelays().empty());
  return record ? *record->channel("Q3") : calibration::ChannelResult{};
}

std::vector<std::string> codes(const calibration::ChannelResult& channel) {
  std::vector<std::string> out;
  for (const auto& finding : channel.findings) out.push_back(finding.code);
  return out;
}

TEST(SeveralShunts, ofAHealthyChainLieOnOneLine) {
  const auto channel = calibrated({});
  EXPECT_EQ(codes(channel), std::vector<std::string>{});
  ASSERT_EQ(channel.shunts.size(), 4u);
  EXPECT_GT(channel.shunts[0].measuredStep, Ratio());  // tension
  EXPECT_LT(channel.shunts[3].measuredStep, Ratio());  // compression
  ASSERT_TRUE(channel.straightness);
  EXPECT_EQ(channel.straightness->degreesOfFreedom, 3);
  EXPECT_GT(channel.straightness->probability, 1e-3);
  EXPECT_LT(channel.straightness->worst_percent, 0.1);
  for (const auto& shunt : channel.shunts) {
    const double residual = (shunt.measuredStep - channel.spanRatio * shunt.predictedStep).in(volt_per_volt);
    EXPECT_NEAR(shunt.residual.in(volt_per_volt), residual, 1e-12);
  }
}

TEST(SeveralShunts, theirSpanIsRightWithinItsUncertainty) {
  int inside = 0;
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    VirtualBench world(benchWithShunts(), {}, seed);
    const auto record = world.calibrate();
    ASSERT_TRUE(record.has_value());
    const auto& channel = *record->channel("Q3");
    const double off_percent =
        100 * std::abs(channel.spanRatio / world.bench->truth("Q3", world.clock.now()).amplifierSpan - 1);
    inside += off_percent <= channel.budget.expandedUncertainty_percent;
    EXPECT_LT(channel.budget.expandedUncertainty_percent, 0.2);
  }
  EXPECT_GE(inside, 17);  // of 20 at 95.45 %: fewer happen once in a thousand
}

TEST(SeveralShunts, aBentAmplifierIsNotLinear) {
  sim::Scenario scenario;
  scenario.channels["Q3"].bend = 0.03;
  const auto found = codes(calibrated(scenario));
  EXPECT_TRUE(std::ranges::count(found, "not-linear"));
  EXPECT_TRUE(std::ranges::count(found, "shunts-disagree"));
}

TEST(SeveralShunts, aLittleBendDisagreesWithGoodResistors) {
  sim::Scenario scenario;
  scenario.channels["Q3"].bend = 0.003;
  EXPECT_EQ(codes(calibrated(scenario)), std::vector<std::string>{"shunts-disagree"});
}

}  // namespace
}  // namespace shuntwright
