#include "driver/calibration/strain_model.h"

#include <gtest/gtest.h>

#include <cmath>

#include "driver/core/random.h"
#include "driver/metrology/first_order.h"
#include "driver/metrology/monte_carlo.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright::calibration {
namespace {

using namespace units;

/// A shipped quarter bridge as its calibration would find it, with nothing but the circuit uncertain.
struct Bench {
  description::Rack rack = test::shippedRack("gantry_beam.toml");
  description::Channel channel = *rack.channel("S01");
  StrainReadings readings;

  Bench() { readings.scale.measured = predictScale(modelOf(rack, channel), {})->steps; }

  std::vector<StrainUncertainty> at(std::vector<Strain> levels, Fraction factor = {}) const {
    const auto zero = zeroUncertainty(rack, channel, readings.scale.zero, readings.zero);
    EXPECT_TRUE(zero) << zero.error().text();
    const auto model = strainModel(rack, channel, readings, levels);
    EXPECT_TRUE(model) << model.error().text();
    auto found = strainUncertainties(*model, levels, factor, zero->secondOrderVariance);
    EXPECT_TRUE(found) << found.error().text();
    return found ? *found : std::vector<StrainUncertainty>{};
  }
};

TEST(StrainUncertainty, farFromZeroItIsThatOfTheScale) {
  Bench bench;
  const auto scale = scaleBudget(bench.rack, bench.channel, bench.readings.scale);
  ASSERT_TRUE(scale);
  const Strain level = 2000.0 * microstrain;
  // The zero's part (leads that warm until the test) is left out.
  bench.readings.zero.leadsShare = 0;
  for (auto& [terminal, lead] : bench.channel.leads) lead.temperatureTolerance = 0.0 * kelvin;
  const auto there = scaleBudget(bench.rack, bench.channel, bench.readings.scale);
  ASSERT_TRUE(there);
  const auto found = bench.at({level});
  ASSERT_EQ(found.size(), 1u);
  // The bridge bends, so that the relative figure differs a little from that of the slope at zero.
  EXPECT_NEAR(found[0].expanded / level, there->expandedUncertainty_percent / 100,
              0.03 * there->expandedUncertainty_percent / 100);
}

TEST(StrainUncertainty, atZeroItIsThatOfTheZero) {
  Bench bench;
  bench.readings.zero.standardUncertainty = 2e-7 * volt_per_volt;
  bench.readings.zero.stability = 5e-7 * volt_per_volt;
  const auto zero = zeroUncertainty(bench.rack, bench.channel, {}, bench.readings.zero);
  ASSERT_TRUE(zero);
  const auto found = bench.at({0.0 * microstrain});
  ASSERT_EQ(found.size(), 1u);
  // zeroUncertainty() is a standard one; by its shapes the expanded one is about twice that.
  EXPECT_LT(found[0].expanded, 2.3 * zero->standard);
  EXPECT_GT(found[0].expanded, 1.6 * zero->standard);
}

TEST(StrainUncertainty, theGaugeFactorScalesWithTheStrain) {
  Bench bench;
  const auto found = bench.at({0.0 * microstrain, 1000.0 * microstrain}, 1.0 * percent);
  EXPECT_DOUBLE_EQ(found[0].expandedWithFactor.in(microstrain), found[0].expanded.in(microstrain));
  // A rectangle of 10 microstrain half-width holds 95.45 % within 9.545; here it dominates.
  EXPECT_GT(found[1].expandedWithFactor.in(microstrain), 9.545);
  EXPECT_LT(found[1].expandedWithFactor.in(microstrain), 9.545 + found[1].expanded.in(microstrain));
}

TEST(StrainUncertainty, eachPartOfTheReadingsIsInIt) {
  const auto expandedWith = [](auto change) {
    Bench bench;
    change(bench);
    return bench.at({1000.0 * microstrain}).at(0).expanded.in(microstrain);
  };
  const double plain = expandedWith([](Bench&) {});
  const Ratio much = 5e-6 * volt_per_volt;
  EXPECT_GT(expandedWith([&](Bench& b) { b.readings.noise = much; }), 2 * plain);
  EXPECT_GT(expandedWith([&](Bench& b) { b.readings.zero.standardUncertainty = much; }), 2 * plain);
  EXPECT_GT(expandedWith([&](Bench& b) { b.readings.zero.returnSpread = 2 * much; }), 2 * plain);
  EXPECT_GT(expandedWith([&](Bench& b) { b.readings.zero.stability = 2 * much; }), 2 * plain);
  EXPECT_GT(expandedWith([&](Bench& b) { b.readings.zero.resolution = 2 * much; }), 2 * plain);
  EXPECT_GT(expandedWith([&](Bench& b) { b.readings.scale.scatter.stepRelative = 0.01; }), 2 * plain);
}

// The full network moved by everything at once, against first order with shapes: JCGM 101 as a second
// opinion.
TEST(StrainUncertainty, aMonteCarloOfTheSameModelAgrees) {
  Bench bench;
  bench.readings.zero.standardUncertainty = 1e-7 * volt_per_volt;
  const std::vector<Strain> levels{0.0 * microstrain, 500.0 * microstrain, -2000.0 * microstrain};
  const auto model = strainModel(bench.rack, bench.channel, bench.readings, levels);
  ASSERT_TRUE(model) << model.error().text();
  Random random(31);
  metrology::MonteCarloOptions options;
  options.trials = 20000;
  const auto drawn = metrology::monteCarlo(*model, random, options);
  ASSERT_TRUE(drawn) << drawn.error().text();
  const auto stated = bench.at(levels);
  for (std::size_t k = 0; k < levels.size(); ++k) {
    const auto& interval = drawn->outputs[Claims::kStrains + k].interval.symmetric;
    EXPECT_NEAR(stated[k].expanded.in(strain), interval.width() / 2, 0.05 * interval.width() / 2) << k;
  }
}

// Somebody else's span and strain: what a circuit that really differs would have read.
TEST(StrainUncertainty, theModelFindsTheTruthOfACircuitThatDiffers) {
  Bench bench;
  auto& channel = bench.channel;
  const Strain level = 1500.0 * microstrain;
  const auto model = strainModel(bench.rack, channel, bench.readings, {&level, 1});
  ASSERT_TRUE(model);
  std::vector<double> x, y(3);
  std::size_t gauge = model->inputs.size();
  for (std::size_t i = 0; i < model->inputs.size(); ++i) {
    x.push_back(model->inputs[i].distribution.mean);
    if (model->inputs[i].quantity.starts_with("shunt resistor") && gauge == model->inputs.size()) gauge = i;
  }
  ASSERT_LT(gauge, model->inputs.size());
  x[gauge] *=
      1.01;  // a larger resistor makes smaller steps: the same reading means a larger span and less strain
  ASSERT_TRUE(model->function(x, y));
  EXPECT_NEAR(y[Claims::kSpan], 1.0, 0.02);
  EXPECT_NEAR(y[Claims::kStrains] / level.in(strain), -0.01, 0.0003);
}

}  // namespace
}  // namespace shuntwright::calibration
