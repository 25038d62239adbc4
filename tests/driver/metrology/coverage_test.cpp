#include "driver/metrology/coverage.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <vector>

namespace shuntwright::metrology {
namespace {

Component normalPart(double u) {
  return {Shape::normal, u};
}
Component rectangularPart(double u) {
  return {Shape::rectangular, u};
}

// JCGM 101:2008, 9.2: additive model of four inputs, 95 % (from memory; the figures in full are computed
// from the exact convolution).
TEST(Coverage, additiveModelOfJcgm101) {
  const std::vector<Component> allNormal(4, normalPart(1));
  EXPECT_NEAR(coverageHalfWidth(allNormal, 0.95), 3.919928, 0.004);
  const std::vector<Component> allRectangular(4, rectangularPart(1));
  EXPECT_NEAR(coverageHalfWidth(allRectangular, 0.95), 3.879407, 0.004);
  const std::vector<Component> oneDominant{rectangularPart(1), rectangularPart(1), rectangularPart(1),
                                           rectangularPart(10)};
  EXPECT_NEAR(coverageHalfWidth(oneDominant, 0.95), 17.015814, 0.02);
}

TEST(Coverage, oneRectangleReachesItsShareOfTheHalfWidth) {
  const Component one = rectangularPart(1 / std::numbers::sqrt3);  // half-width 1
  EXPECT_NEAR(coverageHalfWidth(std::span(&one, 1), 0.9545), 0.9545, 1e-3);
}

// A triangle of half-width 1 holds p within 1 - sqrt(1 - p), a U shape within sin(pi p / 2).
TEST(Coverage, oneTriangleAndOneArcsineMeetTheirQuantiles) {
  const Component triangle{Shape::triangular, 1 / std::sqrt(6.0)};
  EXPECT_NEAR(coverageHalfWidth(std::span(&triangle, 1), 0.9545), 1 - std::sqrt(1 - 0.9545), 1e-3);
  const Component u{Shape::arcsine, 1 / std::sqrt(2.0)};
  EXPECT_NEAR(coverageHalfWidth(std::span(&u, 1), 0.9545), std::sin(std::numbers::pi / 2 * 0.9545), 1e-3);
}

// Of a U shape (half-width 1) plus a normal one (u 0.3): share within a, averaged over the angle.
TEST(Coverage, ofAnArcsineAndANormalPartIsTheAverageOverTheAngle) {
  const std::vector<Component> both{{Shape::arcsine, 1 / std::sqrt(2.0)}, {Shape::normal, 0.3}};
  const double a = coverageHalfWidth(both, 0.95);
  double share = 0;
  constexpr int kAngles = 10'000;
  for (int k = 0; k < kAngles; ++k) {
    const double c = std::cos(std::numbers::pi * (k + 0.5) / kAngles), s = 0.3 * std::sqrt(2.0);
    share += 0.5 * (std::erf((a - c) / s) + std::erf((a + c) / s)) / kAngles;
  }
  EXPECT_NEAR(share, 0.95, 1e-3);
}

TEST(Coverage, ofNothingIsNothing) {
  EXPECT_EQ(coverageHalfWidth({}), 0);
}

TEST(Coverage, aTinyRectangleBesideABigOneCountsAsVariance) {
  const std::vector<Component> both{rectangularPart(1), rectangularPart(1e-4)};
  EXPECT_NEAR(coverageHalfWidth(both), 0.9545 * std::numbers::sqrt3, 2e-3);
}

// NIST Technical Note 1297, table B.1, p = 95.45 %.
TEST(StudentFactor, tableOfNistTechnicalNote1297) {
  const struct {
    double degrees, factor;
  } table[] = {{1, 13.97}, {2, 4.53},  {3, 3.31},  {4, 2.87},  {5, 2.65},   {6, 2.52},
               {7, 2.43},  {8, 2.37},  {9, 2.32},  {10, 2.28}, {16, 2.17},  {19, 2.14},
               {20, 2.13}, {25, 2.11}, {30, 2.09}, {50, 2.05}, {100, 2.025}};
  for (const auto& row : table) EXPECT_NEAR(studentFactor(row.degrees), row.factor, 0.0051) << row.degrees;
  EXPECT_NEAR(studentFactor(kInfinity), 2.000, 5e-4);
}

// GUM (JCGM 100:2008) G.4.1 example: relative u 0.25, 0.57, 0.82 % with n = 10, 5, 15 give nu_eff 19.0 (from
// memory, recomputed).
TEST(EffectiveDegrees, exampleOfGumG41) {
  const WeightedDegrees parts[] = {{0.25, 9}, {0.57, 4}, {0.82, 14}};
  EXPECT_NEAR(effectiveDegrees(parts), 18.99874, 1e-4);
}

// GUM H.1: end gauge, components 25 (18), 9.7 (25.6), 2.9 (50), 16.6 (2) nm give nu_eff 16.7 (from memory;
// 16.76 recomputed).
TEST(EffectiveDegrees, exampleOfGumH1) {
  const WeightedDegrees parts[] = {{25, 18}, {9.7, 25.6}, {2.9, 50}, {16.6, 2}};
  EXPECT_NEAR(effectiveDegrees(parts), 16.76, 0.01);
}

TEST(EffectiveDegrees, areInfiniteWhenEveryPartIs) {
  const WeightedDegrees parts[] = {{1, kInfinity}, {2, kInfinity}};
  EXPECT_EQ(effectiveDegrees(parts), kInfinity);
}

}  // namespace
}  // namespace shuntwright::metrology
