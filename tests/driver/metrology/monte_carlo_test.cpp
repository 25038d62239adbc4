#include "driver/metrology/monte_carlo.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <numeric>
#include <vector>

#include "driver/metrology/first_order.h"
#include "driver/metrology/sampler.h"

namespace shuntwright::metrology {
namespace {

Model sumOf(std::vector<Distribution> inputs) {
  Model model;
  for (std::size_t i = 0; i < inputs.size(); ++i)
    model.inputs.push_back({"X" + std::to_string(i + 1), "", inputs[i]});
  model.function = [](std::span<const double> x, std::span<double> y) -> Result<void> {
    y[0] = std::accumulate(x.begin(), x.end(), 0.0);
    return {};
  };
  return model;
}

// JCGM 101:2008 7.9.2, examples 1 to 3 (from memory): 0.000 35 g with two digits gives 0.5e-5 g; 2 kg with
// one digit 0.5 kg; 0.35 with one digit is 0.4, so 0.05.
TEST(NumericalTolerance, isHalfOfTheLastPlace) {
  const struct {
    double u;
    int digits;
    double tolerance;
  } table[] = {{0.00035, 2, 0.5e-5}, {2, 1, 0.5},       {0.35, 1, 0.05},
               {0.0539, 1, 0.005},   {10.1489, 2, 0.5}, {99.6, 2, 5}};
  for (const auto& row : table) {
    EXPECT_NEAR(numericalTolerance(row.u, row.digits), row.tolerance, 1e-12 * row.tolerance) << row.u;
  }
  EXPECT_EQ(numericalTolerance(0, 2), 0);
}

// JCGM 101:2008 7.7: q = p M values; the shortest of all intervals that hold them.
TEST(CoverageInterval, ofValuesThatCrowdAtOneEnd) {
  std::vector<double> values(1000);
  for (std::size_t i = 0; i < values.size(); ++i) values[i] = -std::log1p(-(double(i) + 0.5) / 1000);
  const auto interval = coverageIntervals(values, 0.9);
  EXPECT_EQ(interval.symmetric.low, values[49]);
  EXPECT_EQ(interval.symmetric.high, values[949]);
  EXPECT_EQ(interval.shortest.low, values[0]);  // an exponential is densest at 0
  EXPECT_EQ(interval.shortest.high, values[900]);
}

TEST(MonteCarlo, isRepeatedByItsSeed) {
  const Model model = sumOf({normal(1, 2), rectangular(0, 1)});
  MonteCarloOptions options;
  options.trials = 1000;
  Random a(5), b(5), c(6);
  const auto one = monteCarlo(model, a, options), two = monteCarlo(model, b, options),
             other = monteCarlo(model, c, options);
  ASSERT_TRUE(one && two && other);
  EXPECT_EQ(one->outputs[0].mean, two->outputs[0].mean);
  EXPECT_NE(one->outputs[0].mean, other->outputs[0].mean);
  EXPECT_EQ(one->trials, 1000u);
}

TEST(MonteCarlo, adaptiveStopsWhenStableAndSaysWhenItGaveUp) {
  const Model model = sumOf({normal(1, 2)});
  Random random(7);
  MonteCarloOptions options;
  options.digits = 1;
  const auto quick = monteCarlo(model, random, options);
  ASSERT_TRUE(quick);
  EXPECT_TRUE(quick->stable);
  options.digits = 2;
  const auto finer = monteCarlo(model, random, options);
  ASSERT_TRUE(finer);
  EXPECT_TRUE(finer->stable);
  EXPECT_GT(finer->trials, quick->trials);
  EXPECT_NEAR(finer->outputs[0].standardUncertainty, 2, 0.05);
  EXPECT_NEAR(finer->outputs[0].interval.symmetric.high, 1 + 2 * studentFactor(kInfinity), 0.1);
  options.digits = 4;
  options.mostTrials = 50'000;
  const auto gaveUp = monteCarlo(model, random, options);
  ASSERT_TRUE(gaveUp);
  EXPECT_FALSE(gaveUp->stable);
  EXPECT_EQ(gaveUp->trials, 50'000u);
}

TEST(MonteCarlo, reportsTheTrialThatFailed) {
  Model model = sumOf({rectangular(0, 1)});
  model.function = [](std::span<const double> x, std::span<double> y) -> Result<void> {
    if (x[0] > 0.9) return fail(ErrorCode::bad_use, "no such bridge");
    y[0] = x[0];
    return {};
  };
  Random random(1);
  const auto result = monteCarlo(model, random);
  ASSERT_FALSE(result);
  EXPECT_NE(result.error().text().find("trial"), std::string::npos);
  EXPECT_NE(result.error().text().find("no such bridge"), std::string::npos);
}

TEST(MonteCarlo, refusesNonsense) {
  const Model model = sumOf({normal(0, 1)});
  Random random(1);
  for (const double p : {0.0, 1.0, -1.0}) {
    MonteCarloOptions options;
    options.probability = p;
    EXPECT_FALSE(monteCarlo(model, random, options)) << p;
  }
  MonteCarloOptions one;
  one.trials = 1;
  EXPECT_FALSE(monteCarlo(model, random, one));
}

// A linear model of normal inputs is propagated exactly by both: means, covariance of two outputs.
TEST(MonteCarlo, covarianceOfOutputsAgreesWithTheLawOfPropagation) {
  Model model = sumOf({normal(1, 2), normal(3, 1), normal(0, 0.5)});
  model.correlations = {{0, 1, 0.6}, {1, 2, -0.3}};
  model.outputs = 2;
  model.function = [](std::span<const double> x, std::span<double> y) -> Result<void> {
    y[0] = x[0] + 2 * x[1];
    y[1] = x[1] - x[2] + 0.5 * x[0];
    return {};
  };
  const auto linear = firstOrder(model);
  Random random(3);
  MonteCarloOptions options;
  options.trials = 400'000;
  const auto drawn = monteCarlo(model, random, options);
  ASSERT_TRUE(linear && drawn);
  for (std::size_t k = 0; k < 2; ++k) {
    EXPECT_NEAR(drawn->outputs[k].mean, linear->outputs[k].value, 0.03);
    for (std::size_t l = 0; l < 2; ++l) {
      EXPECT_NEAR(drawn->covariance(k, l), linear->covariance(k, l), 0.01 * linear->covariance(k, k))
          << k << l;
    }
  }
}

double drawnCorrelation(const Model& model, int draws) {
  auto sampler = Sampler::of(model);
  EXPECT_TRUE(sampler) << sampler.error().text();
  Random random(8);
  double sx = 0, sy = 0, sxy = 0, x[2];
  for (int i = 0; i < draws; ++i) {
    sampler->draw(random, x);
    for (std::size_t k = 0; k < 2; ++k) x[k] -= model.inputs[k].distribution.mean;
    sx += x[0] * x[0];
    sy += x[1] * x[1];
    sxy += x[0] * x[1];
  }
  return sxy / std::sqrt(sx * sy);
}

TEST(Sampler, givesValuesOfAnyShapeTheStatedCorrelation) {
  constexpr int kDraws = 200'000;
  const std::vector<Distribution> shapes{normal(1, 2), rectangular(2, 3), triangular(-1, 1), arcsine(4, 0.1)};
  for (const auto& a : shapes) {
    for (const auto& b : shapes) {
      for (const double r : {-0.9, 0.2, 0.7}) {
        Model model = sumOf({a, b});
        model.correlations = {{0, 1, r}};
        EXPECT_NEAR(drawnCorrelation(model, kDraws), r, 0.01) << name(a.shape) << ' ' << name(b.shape);
      }
    }
  }
}

TEST(Sampler, fullCorrelationMovesInputsTogether) {
  for (const auto& d : {normal(0, 1), rectangular(0, 1), arcsine(0, 1), normal(0, 1, 5)}) {
    Model model = sumOf({d, d});
    model.correlations = {{0, 1, 1.0}};
    auto sampler = Sampler::of(model);
    ASSERT_TRUE(sampler);
    Random random(2);
    for (int i = 0; i < 100; ++i) {
      double x[2];
      sampler->draw(random, x);
      EXPECT_NEAR(x[0], x[1], 1e-7) << name(d.shape);
    }
  }
}

// Largest correlation of a normal and a rectangular quantity: sqrt(3 / pi).
TEST(Sampler, refusesACorrelationThatTwoShapesCannotHave) {
  Model model = sumOf({normal(0, 1), rectangular(0, 1)});
  model.correlations = {{0, 1, std::sqrt(3 / std::numbers::pi) + 1e-3}};
  ASSERT_FALSE(Sampler::of(model));
  model.correlations = {{0, 1, std::sqrt(3 / std::numbers::pi) - 1e-3}};
  EXPECT_TRUE(Sampler::of(model));
}

// JCGM 102: means of readings taken together are drawn from a joint t, whose variances are nu / (nu - 2)
// larger.
TEST(Sampler, meansOfFewReadingsAreDrawnFromAJointT) {
  Model model = sumOf({normal(0, 1, 6), normal(0, 1, 6)});
  model.correlations = {{0, 1, 0.5}};
  Random random(9);
  MonteCarloOptions options;
  options.trials = 400'000;
  const auto drawn = monteCarlo(model, random, options);
  ASSERT_TRUE(drawn);
  EXPECT_NEAR(std::pow(drawn->outputs[0].standardUncertainty, 2), 3 * 6.0 / 4, 0.07);
  // With different degrees of freedom each margin is still its own t.
  options.trials = 50'000;
  model.inputs[1].distribution.degreesOfFreedom = 12;
  model.function = [](std::span<const double> x, std::span<double> y) -> Result<void> {
    y[0] = x[1];
    return {};
  };
  const auto margin = monteCarlo(model, random, options);
  ASSERT_TRUE(margin);
  EXPECT_NEAR(std::pow(margin->outputs[0].standardUncertainty, 2), 12.0 / 10, 0.06);
}

// JCGM 101:2008 8.1.
TEST(Agreement, holdsWhenBothEndsAreWithinTheTolerance) {
  EXPECT_TRUE(agreement({-3.92, 3.92}, {-3.94, 3.91}, 0.05).holds());
  EXPECT_FALSE(agreement({-3.92, 3.92}, {-3.94, 3.86}, 0.05).holds());
  EXPECT_FALSE(agreement({-3.98, 3.92}, {-3.92, 3.92}, 0.05).holds());
}

}  // namespace
}  // namespace shuntwright::metrology
