#include "driver/calibration/linearity.h"

#include <gtest/gtest.h>

#include <cmath>

#include "driver/core/random.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright::calibration {
namespace {

using namespace units;

/// A shipped channel with four shunts of its own kind, from about 500 to 4000 microstrain (invented values).
struct Bench {
  description::Rack rack = test::shippedRack("gantry_beam.toml");
  description::Channel channel = *rack.channel("S01");

  /// @param tolerance  expanded uncertainty (k = 2) of each resistor's certificate.
  explicit Bench(Fraction tolerance) {
    const auto shunt = channel.shunts.front();
    const auto resistor = rack.resistors.at(shunt.resistor);
    channel.shunts.clear();
    for (const double value : {120e3, 60e3, 30e3, 15e3}) {
      auto own = resistor;
      own.value = value * ohm;
      own.expandedUncertainty = tolerance;
      own.coverageFactor = 2;
      own.temperatureSpan = 0.0 * kelvin;
      const std::string name = "R" + std::to_string(static_cast<int>(value));
      rack.resistors[name] = own;
      channel.shunts.push_back(shunt);
      channel.shunts.back().resistor = name;
    }
  }

  std::vector<Ratio> predicted() const { return predictScale(modelOf(rack, channel), {})->steps; }

  Linearity of(const std::vector<Ratio>& measured, Ratio noise) const {
    auto found = linearityOf(rack, channel, {}, measured, std::vector<Ratio>(measured.size(), noise));
    EXPECT_TRUE(found) << found.error().text();
    return found ? *found : Linearity{};
  }
};

std::vector<Ratio> through(const std::vector<Ratio>& steps, double span, double bend_per_mV) {
  std::vector<Ratio> out;
  for (const auto step : steps)
    out.push_back(step * (span * (1 + bend_per_mV * step.in(millivolt_per_volt))));
  return out;
}

TEST(Linearity, ofAStraightChainIsItsSpan) {
  const Bench bench(0.05 * percent);
  const Linearity found = bench.of(through(bench.predicted(), 1.02, 0), 1e-7 * volt_per_volt);
  EXPECT_NEAR(found.span, 1.02, 1e-12);
  EXPECT_LT(found.worst_percent, 1e-10);
  EXPECT_GT(found.lackOfFit.probability, 0.999);
  EXPECT_EQ(found.lackOfFit.degrees, 3);
}

TEST(Linearity, ofABentChainFailsWithGoodResistorsOnly) {
  const Bench good(0.005 * percent);
  const auto bent = through(good.predicted(), 1, 0.001);  // 0.2 % at the largest step
  const Linearity found = good.of(bent, 1e-8 * volt_per_volt);
  EXPECT_LT(found.lackOfFit.probability, 1e-3);
  EXPECT_GT(found.worst_percent, 0.02);
  // Resistors known to half a percent could explain it all.
  const Bench poor(0.5 * percent);
  EXPECT_GT(poor.of(bent, 1e-8 * volt_per_volt).lackOfFit.probability, 0.5);
}

TEST(Linearity, shuntsOfOneResistorAreOneWitness) {
  Bench alike(0.1 * percent);
  const auto straight = through(alike.predicted(), 1, 0);
  const double independent = alike.of(straight, 1e-8 * volt_per_volt).standardUncertainty;
  for (auto& shunt : alike.channel.shunts) shunt.resistor = "R60000";
  const double shared = alike.of(through(alike.predicted(), 1, 0), 1e-8 * volt_per_volt).standardUncertainty;
  // The certificates' part of the span shrinks with the number of resistors; that of the gauge's arm does
  // not.
  EXPECT_GT(shared, 1.05 * independent);
}

// Chains that are straight, with resistors and readings off by what is stated, are rejected at 5 % as often
// as that.
TEST(Linearity, lackOfFitIsHonest) {
  const Bench bench(0.1 * percent);
  const auto inputs = inputsOf(bench.rack, bench.channel);
  const ChannelModel nominal = modelOf(bench.rack, bench.channel);
  const double noise = 2e-7;
  constexpr int kBenches = 3000;
  Random random(17);
  int rejected = 0, inside = 0;
  for (int b = 0; b < kBenches; ++b) {
    ChannelModel real = nominal;
    for (const auto& in : inputs)
      in.shift(real, in.input.distribution.draw(random) - in.input.distribution.mean);
    // The gauge of the model is the one that reads zero; what the zero shows is known.
    const auto prediction = predictScale(real, {});
    ASSERT_TRUE(prediction);
    std::vector<Ratio> measured;
    for (const auto step : prediction->steps)
      measured.push_back(0.98 * step + noise * random.normal() * volt_per_volt);
    const Linearity found = bench.of(measured, noise * volt_per_volt);
    rejected += found.lackOfFit.probability < 0.05;
    inside += std::abs(found.span - 0.98) < 2 * found.standardUncertainty;
  }
  // Five standard deviations of a binomial share, and a little for shapes that are not normal.
  EXPECT_NEAR(rejected / double(kBenches), 0.05, 0.022);
  EXPECT_NEAR(inside / double(kBenches), 0.9545, 0.025);
}

TEST(Linearity, refusesWhatMakesNoSense) {
  const Bench bench(0.1 * percent);
  const auto steps = bench.predicted();
  const auto noises = [](std::size_t n, double u) { return std::vector<Ratio>(n, u * volt_per_volt); };
  EXPECT_FALSE(linearityOf(bench.rack, bench.channel, {}, steps, noises(3, 1e-7)));
  EXPECT_FALSE(linearityOf(bench.rack, bench.channel, {}, {}, {}));
  const auto silent = linearityOf(bench.rack, bench.channel, {}, steps, noises(4, 0));
  ASSERT_FALSE(silent);
  EXPECT_NE(silent.error().text().find("S01"), std::string::npos);
}

}  // namespace
}  // namespace shuntwright::calibration
