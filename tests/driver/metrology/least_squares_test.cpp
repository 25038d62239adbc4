#include "driver/metrology/least_squares.h"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

#include "driver/core/random.h"

namespace shuntwright::metrology {
namespace {

const std::vector<double> kX{1, 2, 3, 4};
const std::vector<double> kY{2.1, 3.9, 6.2, 7.8};

// Through the origin with weights w = 1/u^2: b = sum(w x y) / sum(w x^2), u(b) = sum(w x^2)^-1/2.
TEST(LeastSquares, throughTheOriginWithWeightsIsItsClosedForm) {
  ObservationErrors errors;
  errors.uncertainties = {0.1, 0.2, 0.1, 0.4};
  const auto fit = fitLinear(throughOrigin(kX), kY, errors);
  ASSERT_TRUE(fit);
  double xy = 0, xx = 0;
  for (std::size_t i = 0; i < 4; ++i) {
    const double w = 1 / (errors.uncertainties[i] * errors.uncertainties[i]);
    xy += w * kX[i] * kY[i];
    xx += w * kX[i] * kX[i];
  }
  EXPECT_NEAR(fit->parameters[0], xy / xx, 1e-14);
  EXPECT_NEAR(fit->standardUncertainty(0), 1 / std::sqrt(xx), 1e-15);
  double chi = 0;
  for (std::size_t i = 0; i < 4; ++i) {
    EXPECT_NEAR(fit->residuals[i], kY[i] - kX[i] * xy / xx, 1e-14);
    EXPECT_NEAR(fit->fitted[i] + fit->residuals[i], kY[i], 1e-15);
    chi += std::pow(fit->residuals[i] / errors.uncertainties[i], 2);
  }
  EXPECT_NEAR(fit->chiSquared, chi, 1e-12);
  EXPECT_EQ(fit->degreesOfFreedom, 3u);

  errors.scaledByResiduals = true;
  const auto scaled = fitLinear(throughOrigin(kX), kY, errors);
  ASSERT_TRUE(scaled);
  EXPECT_NEAR(scaled->standardUncertainty(0), std::sqrt(chi / 3 / xx), 1e-14);
}

TEST(LeastSquares, aDiagonalCovarianceIsTheSameAsUncertainties) {
  ObservationErrors plain, full;
  plain.uncertainties = {0.1, 0.2, 0.1, 0.4};
  full.covariance = Matrix(4, 4);
  for (std::size_t i = 0; i < 4; ++i) (*full.covariance)(i, i) = std::pow(plain.uncertainties[i], 2);
  const auto one = fitLinear(straightLine(kX), kY, plain), other = fitLinear(straightLine(kX), kY, full);
  ASSERT_TRUE(one && other);
  for (std::size_t k = 0; k < 2; ++k) {
    EXPECT_NEAR(one->parameters[k], other->parameters[k], 1e-14);
    EXPECT_NEAR(one->standardUncertainty(k), other->standardUncertainty(k), 1e-15);
  }
  EXPECT_NEAR(one->correlation(0, 1), other->correlation(0, 1), 1e-14);
}

// An error common to all observations (variance c^2) moves the intercept only: its variance grows by c^2, and
// the slope keeps its own.
TEST(LeastSquares, aCommonErrorGoesIntoTheIntercept) {
  ObservationErrors alone, common;
  alone.covariance = Matrix(4, 4);
  common.covariance = Matrix(4, 4);
  for (std::size_t i = 0; i < 4; ++i) {
    for (std::size_t j = 0; j < 4; ++j) {
      (*alone.covariance)(i, j) = i == j ? 0.01 : 0;
      (*common.covariance)(i, j) = (*alone.covariance)(i, j) + 0.25;
    }
  }
  const auto one = fitLinear(straightLine(kX), kY, alone), other = fitLinear(straightLine(kX), kY, common);
  ASSERT_TRUE(one && other);
  EXPECT_NEAR(other->parameters[0], one->parameters[0], 1e-12);
  EXPECT_NEAR(other->covariance(0, 0), one->covariance(0, 0) + 0.25, 1e-12);
  EXPECT_NEAR(other->covariance(1, 1), one->covariance(1, 1), 1e-14);
}

// Over many simulated sets the parameters scatter as the covariance says, and chi-square fails as often as it
// should.
TEST(LeastSquares, covarianceAndLackOfFitAreHonest) {
  Random random(12);
  ObservationErrors errors;
  errors.uncertainties = {0.1, 0.2, 0.1, 0.4, 0.3, 0.2};
  const std::vector<double> x{-1, 0, 1, 2, 3, 4};
  constexpr int kSets = 20'000;
  double squares = 0, u = 0;
  int rejected = 0;
  for (int s = 0; s < kSets; ++s) {
    std::vector<double> y;
    for (std::size_t i = 0; i < x.size(); ++i)
      y.push_back(3 - 2 * x[i] + errors.uncertainties[i] * random.normal());
    const auto fit = fitLinear(straightLine(x), y, errors);
    ASSERT_TRUE(fit);
    squares += std::pow(fit->parameters[1] + 2, 2);
    u = fit->standardUncertainty(1);
    rejected += lackOfFit(*fit).probability < 0.05;
  }
  EXPECT_NEAR(std::sqrt(squares / kSets) / u, 1, 0.025);
  EXPECT_NEAR(rejected / double(kSets), 0.05, 0.008);
}

TEST(LeastSquares, aBentChainFailsTheTestOfAStraightOne) {
  const std::vector<double> x{-2, -1, 0, 1, 2};
  std::vector<double> y;
  for (const double v : x) y.push_back(v + 0.01 * v * v);
  ObservationErrors errors;
  errors.uncertainties.assign(5, 0.002);
  const auto line = fitLinear(straightLine(x), y, errors), parabola = fitLinear(polynomial(x, 2), y, errors);
  ASSERT_TRUE(line && parabola);
  EXPECT_LT(lackOfFit(*line).probability, 1e-6);
  EXPECT_GT(lackOfFit(*parabola).probability, 0.99);
  EXPECT_NEAR(parabola->parameters[2], 0.01, 1e-15);
}

TEST(LeastSquares, refusesWhatCannotBeFitted) {
  const std::vector<double> same{2, 2, 2, 2};
  const auto blind = fitLinear(straightLine(same), kY);
  ASSERT_FALSE(blind);
  EXPECT_NE(blind.error().text().find("cannot tell the parameters apart"), std::string::npos);
  EXPECT_FALSE(fitLinear(polynomial(kX, 4), kY));                       // five parameters from four
  EXPECT_FALSE(fitLinear(straightLine(kX), std::vector<double>{1.0}));  // sizes
  EXPECT_FALSE(fitLinear(Matrix(4, 0), kY));
  EXPECT_FALSE(fitLinear(throughOrigin(std::vector<double>(4, 0.0)), kY));
  ObservationErrors errors;
  errors.uncertainties = {0.1, 0.1, 0, 0.1};
  const auto zero = fitLinear(straightLine(kX), kY, errors);
  ASSERT_FALSE(zero);
  EXPECT_NE(zero.error().text().find("observation 3"), std::string::npos);
  errors.uncertainties = {0.1};
  EXPECT_FALSE(fitLinear(straightLine(kX), kY, errors));
  ObservationErrors contradictory;
  contradictory.covariance = Matrix(4, 4);  // all 0
  EXPECT_FALSE(fitLinear(straightLine(kX), kY, contradictory));
  contradictory.covariance = Matrix(3, 3);
  EXPECT_FALSE(fitLinear(straightLine(kX), kY, contradictory));
}

TEST(LackOfFit, needsRepeatsAndMoreSettingsThanParameters) {
  EXPECT_FALSE(lackOfFitFromRepeats(straightLine(kX), kY));
  EXPECT_FALSE(lackOfFitFromRepeats(straightLine(std::vector<double>{1, 1, 2, 2}), kY));
  EXPECT_TRUE(lackOfFitFromRepeats(straightLine(std::vector<double>{1, 1, 2, 3}), kY));
}

TEST(Fit, withNoDegreesOfFreedomHasNoScatterToShow) {
  const auto fit = fitLinear(straightLine(std::vector<double>{1, 2}), std::vector<double>{3, 5});
  ASSERT_TRUE(fit);
  EXPECT_NEAR(fit->parameters[1], 2, 1e-15);
  EXPECT_EQ(fit->residualDeviation(), 0);
  EXPECT_EQ(lackOfFit(*fit).probability, 1);
}

}  // namespace
}  // namespace shuntwright::metrology
