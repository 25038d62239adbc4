// proves P-15
#include "driver/calibration/linearity.h"

#include <gtest/gtest.h>

#include <cmath>
#include <limits>

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

  PredictedSteps known() const { return *predictedSteps(rack, channel, {}); }

  Linearity of(const std::vector<Ratio>& measured, Ratio noise) const {
    auto found = linearityOf(known(), measured, std::vector<Ratio>(measured.size(), noise));
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

// What a shunt says of the span counts by what is known of it. Two values of one quantity with standard
// uncertainties u and 2u: the weighted mean has u sqrt(4 / 5) (GUM, and any textbook on least squares).
TEST(Linearity, theBetterResistorCountsMore) {
  Bench bench(0.1 * percent);
  bench.channel.shunts.resize(2);
  for (auto& shunt : bench.channel.shunts) shunt.resistor = "R60000";
  bench.rack.resistors["R15000"] = bench.rack.resistors["R60000"];
  bench.rack.resistors["R15000"].expandedUncertainty = 0.2 * percent;
  bench.channel.shunts[1].resistor = "R15000";
  PredictedSteps known = bench.known();
  known.covariance(0, 1) = known.covariance(1, 0) = 0;  // of the resistors alone
  const double step = known.steps[0].in(volt_per_volt);
  known.covariance(0, 0) = step * step * 1e-6 / 4;
  known.covariance(1, 1) = step * step * 1e-6;
  const std::vector<Ratio> measured{1.001 * known.steps[0], 0.996 * known.steps[1]};
  const auto found = linearityOf(known, measured, std::vector<Ratio>(2, 1e-12 * volt_per_volt));
  ASSERT_TRUE(found);
  EXPECT_NEAR(found->span, (4 * 1.001 + 0.996) / 5, 1e-9);
  EXPECT_NEAR(found->standardUncertainty, 0.0005 * std::sqrt(0.8), 2e-6);
  EXPECT_NEAR(found->residuals[1] / known.steps[1], 0.996 - found->span, 1e-9);
  // The residual of the second one: 4/5 of the difference of the two.
  EXPECT_NEAR(found->worstExpanded_percent, 100 * 2 * 0.8 * std::hypot(0.0005, 0.001), 0.001);
}

TEST(Linearity, aShuntThatWasNotMeasuredCountsForNothing) {
  const Bench bench(0.05 * percent);
  auto measured = through(bench.predicted(), 1.02, 0);
  measured[2] = std::numeric_limits<double>::quiet_NaN() * volt_per_volt;
  const Linearity found = bench.of(measured, 1e-7 * volt_per_volt);
  EXPECT_NEAR(found.span, 1.02, 1e-12);
  EXPECT_EQ(found.lackOfFit.degrees, 2);
  EXPECT_TRUE(std::isnan(found.residuals[2].in(volt_per_volt)));
}

// Chains that are straight, with resistors and readings off by what is stated, are rejected at 5 % as often
// as that.
TEST(Linearity, lackOfFitIsHonest) {
  const Bench bench(0.1 * percent);
  const auto inputs = inputsOf(bench.rack, bench.channel);
  const ChannelModel nominal = modelOf(bench.rack, bench.channel);
  const PredictedSteps known = bench.known();
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
    const auto line = linearityOf(known, measured, std::vector<Ratio>(measured.size(), noise * volt_per_volt));
    ASSERT_TRUE(line);
    const Linearity& found = *line;
    rejected += found.lackOfFit.probability < 0.05;
    inside += std::abs(found.span - 0.98) < 2 * found.standardUncertainty;
  }
  // Five standard deviations of a binomial share, and a little for shapes that are not normal.
  EXPECT_NEAR(rejected / double(kBenches), 0.05, 0.022);
  EXPECT_NEAR(inside / double(kBenches), 0.9545, 0.025);
}

TEST(Linearity, refusesWhatMakesNoSense) {
  const Bench bench(0.1 * percent);
  const PredictedSteps known = bench.known();
  const auto steps = bench.predicted();
  const auto noises = [](std::size_t n, double u) { return std::vector<Ratio>(n, u * volt_per_volt); };
  EXPECT_FALSE(linearityOf(known, steps, noises(3, 1e-7)));
  EXPECT_FALSE(linearityOf(known, {}, {}));
  const auto silent = linearityOf(known, steps, noises(4, 0));
  ASSERT_FALSE(silent);
  EXPECT_NE(silent.error().text().find("resolution"), std::string::npos);
  const std::vector<Ratio> none(4, std::numeric_limits<double>::quiet_NaN() * volt_per_volt);
  EXPECT_FALSE(linearityOf(known, none, noises(4, 1e-7)));
}

}  // namespace
}  // namespace shuntwright::calibration
