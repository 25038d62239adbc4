#include "driver/metrology/distribution.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <vector>

namespace shuntwright::metrology {
namespace {

// JCGM 100:2008 H.2: five readings each (from memory); means and standard uncertainties of the means as the
// documentation of a national institute's uncertainty library quotes them, to the digits printed.
TEST(TypeA, meansOfGumH2) {
  const struct {
    std::vector<double> readings;
    double mean, u, halfDigitOfMean, halfDigitOfU;
  } table[] = {{{5.007, 4.994, 5.005, 4.990, 4.999}, 4.9990, 0.0032, 5e-5, 5e-5},
               {{19.663, 19.639, 19.640, 19.685, 19.678}, 19.6610, 0.0095, 5e-5, 5e-5},
               {{1.0456, 1.0438, 1.0468, 1.0428, 1.0433}, 1.04446, 0.00075, 5e-6, 5e-6}};
  for (const auto& row : table) {
    const auto d = typeA(row.readings);
    ASSERT_TRUE(d);
    EXPECT_NEAR(d->mean, row.mean, row.halfDigitOfMean);
    EXPECT_NEAR(d->standardUncertainty, row.u, row.halfDigitOfU);
    EXPECT_EQ(d->degreesOfFreedom, 4);
  }
}

TEST(TypeA, ofOneReadingIsRefusedWithARemedy) {
  const double one[] = {1.0};
  const auto d = typeA(one);
  ASSERT_FALSE(d);
  EXPECT_EQ(d.error().code, ErrorCode::bad_use);
  EXPECT_FALSE(d.error().remedy.empty());
}

// JCGM 100:2008 4.3.7 and 4.3.9 (rectangular, triangular), JCGM 101:2008 6.4.6 (arcsine): u = a / sqrt(3),
// sqrt(6), sqrt(2).
TEST(Distribution, standardUncertaintyOfAHalfWidth) {
  EXPECT_DOUBLE_EQ(rectangular(0, 3).standardUncertainty, 3 / std::sqrt(3.0));
  EXPECT_DOUBLE_EQ(triangular(0, 3).standardUncertainty, 3 / std::sqrt(6.0));
  EXPECT_DOUBLE_EQ(arcsine(0, 3).standardUncertainty, 3 / std::sqrt(2.0));
  for (const auto& d : {rectangular(0, 3), triangular(0, 3), arcsine(0, 3)})
    EXPECT_DOUBLE_EQ(d.halfWidth(), 3);
  EXPECT_EQ(normal(0, 1).halfWidth(), kInfinity);
}

/// Share of draws below each of the quantiles of a shape.
TEST(Distribution, drawsFallBelowEachQuantileAsOftenAsItSays) {
  Random random(11);
  for (const Shape shape : {Shape::normal, Shape::rectangular, Shape::triangular, Shape::arcsine}) {
    const Distribution d{shape, 5, 2, kInfinity};
    constexpr int kDraws = 200'000;
    std::vector<double> values(kDraws);
    for (auto& v : values) v = d.draw(random);
    for (const double p : {0.01, 0.1, 0.3, 0.5, 0.75, 0.975}) {
      const double limit = 5 + 2 * standardQuantile(shape, p);
      int below = 0;
      for (const double v : values) below += v < limit;
      // Five standard deviations of a binomial share.
      EXPECT_NEAR(below / double(kDraws), p, 5 * std::sqrt(p * (1 - p) / kDraws)) << name(shape) << ' ' << p;
    }
  }
}

double varianceOf(const Distribution& d, int draws, std::uint64_t seed) {
  Random random(seed);
  double sum = 0;
  for (int i = 0; i < draws; ++i) {
    const double e = d.draw(random) - d.mean;
    sum += e * e;
  }
  return sum / draws;
}

// JCGM 101:2008 6.4.9.4: the variance of a scaled and shifted t is (s^2/n) nu/(nu - 2).
TEST(Distribution, fewDegreesOfFreedomWidenANormalShape) {
  EXPECT_NEAR(varianceOf(normal(3, 0.5, 10), 400'000, 1), 0.25 * 10 / 8, 0.004);
  EXPECT_NEAR(varianceOf(normal(3, 0.5), 400'000, 2), 0.25, 0.003);
}

// JCGM 101:2008 6.4.3.4: variance (b - a)^2/12 + d^2/9; d / half-width = 1/sqrt(2 nu), GUM G.4.2.
TEST(Distribution, fewDegreesOfFreedomBlurTheLimitsOfARectangle) {
  const double d = 1 / std::sqrt(2 * 2.0);
  EXPECT_NEAR(varianceOf(rectangular(0, 1, 2), 400'000, 3), 1.0 / 3 + d * d / 9, 0.002);
}

// Mean nu and variance 2 nu of chi-square, below and above two degrees of freedom.
TEST(ChiSquared, meanAndVariance) {
  for (const double nu : {0.7, 1.0, 4.0, 25.6}) {
    Random random(4);
    double sum = 0, square = 0;
    constexpr int kDraws = 200'000;
    for (int i = 0; i < kDraws; ++i) {
      const double c = drawChiSquared(nu, random);
      sum += c;
      square += c * c;
    }
    const double mean = sum / kDraws;
    EXPECT_NEAR(mean, nu, 5 * std::sqrt(2 * nu / kDraws)) << nu;
    EXPECT_NEAR(square / kDraws - mean * mean, 2 * nu, 0.05 * nu + 0.03) << nu;
  }
}

}  // namespace
}  // namespace shuntwright::metrology
