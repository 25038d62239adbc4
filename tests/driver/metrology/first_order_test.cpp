#include "driver/metrology/first_order.h"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

namespace shuntwright::metrology {
namespace {

Model modelOf(std::vector<Distribution> inputs, std::function<double(std::span<const double>)> f) {
  Model model;
  for (std::size_t i = 0; i < inputs.size(); ++i)
    model.inputs.push_back({"X" + std::to_string(i + 1), "", inputs[i]});
  model.function = [f = std::move(f)](std::span<const double> x, std::span<double> y) -> Result<void> {
    y[0] = f(x);
    return {};
  };
  return model;
}

Estimate estimateOf(const Model& model, const FirstOrderOptions& options = {}) {
  auto result = firstOrder(model, options);
  EXPECT_TRUE(result) << result.error().text();
  return result ? result->outputs.front() : Estimate{};
}

TEST(FirstOrder, givenSensitivitiesReplaceTheDifferences) {
  const Model model = modelOf({normal(1, 0.3), normal(2, 0.4)}, [](auto x) { return x[0] * x[1]; });
  FirstOrderOptions exact;
  exact.sensitivities = Matrix(1, 2);
  (*exact.sensitivities)(0, 0) = 5;
  (*exact.sensitivities)(0, 1) = 10;
  const Estimate e = estimateOf(model, exact);
  EXPECT_EQ(e.value, 2);
  EXPECT_DOUBLE_EQ(e.standardUncertainty, std::hypot(1.5, 4.0));
  EXPECT_EQ(e.contributions[1].sensitivity, 10);
}

TEST(FirstOrder, sensitivitiesOfTheWrongSizeAreRefused) {
  const Model model = modelOf({normal(1, 0.3)}, [](auto x) { return x[0]; });
  FirstOrderOptions wrong;
  wrong.sensitivities = Matrix(1, 2);
  EXPECT_EQ(firstOrder(model, wrong).error().code, ErrorCode::bad_use);
}

// Var(x^2) = 4 m^2 u^2 + 2 u^4 and Var(x y) = mx^2 uy^2 + my^2 ux^2 + ux^2 uy^2 for independent normal
// inputs: the second-order terms are the whole rest.
TEST(FirstOrder, secondOrderTermsAreExactForSquaresAndProducts) {
  FirstOrderOptions second;
  second.secondOrder = true;
  const Model square = modelOf({normal(3, 0.5)}, [](auto x) { return x[0] * x[0]; });
  EXPECT_NEAR(std::pow(estimateOf(square, second).standardUncertainty, 2), 4 * 9 * 0.25 + 2 * 0.0625, 1e-10);
  const Model product = modelOf({normal(3, 0.5), normal(-2, 0.7)}, [](auto x) { return x[0] * x[1]; });
  const Estimate e = estimateOf(product, second);
  EXPECT_NEAR(std::pow(e.standardUncertainty, 2), 9 * 0.49 + 4 * 0.25 + 0.25 * 0.49, 1e-10);
  EXPECT_NEAR(e.secondOrderVariance, 0.25 * 0.49, 1e-10);
  EXPECT_NEAR(std::pow(estimateOf(product).standardUncertainty, 2), 9 * 0.49 + 4 * 0.25, 1e-10);
}

// x^3 about m: f' = 3 m^2, f'' = 6 m, f''' = 6, so the formula gives 9 m^4 u^2 + (18 m^2 + 18 m^2) u^4.
TEST(FirstOrder, theCubicPartIsCountedOnce) {
  FirstOrderOptions second;
  second.secondOrder = true;
  const double m = 2, u = 0.1;
  const Model cube = modelOf({normal(m, u)}, [](auto x) { return x[0] * x[0] * x[0]; });
  EXPECT_NEAR(std::pow(estimateOf(cube, second).standardUncertainty, 2),
              9 * std::pow(m, 4) * u * u + 36 * m * m * std::pow(u, 4), 1e-10);
}

// x y^2: f_x f_xyy = m_y^2 * 2, f_xy = 2 m_y, f_yy = 2 m_x.
TEST(FirstOrder, mixedThirdDerivativesCount) {
  FirstOrderOptions second;
  second.secondOrder = true;
  const double mx = 3, my = 2, ux = 0.1, uy = 0.2;
  const Model model = modelOf({normal(mx, ux), normal(my, uy)}, [](auto x) { return x[0] * x[1] * x[1]; });
  const double first = std::pow(my * my * ux, 2) + std::pow(2 * mx * my * uy, 2);
  const double cross = std::pow(2 * my, 2) + my * my * 2;  // f_xy^2 + f_x f_xyy; f_y f_yxx = 0
  const double own = std::pow(2 * mx, 2) / 2;
  EXPECT_NEAR(std::pow(estimateOf(model, second).standardUncertainty, 2),
              first + cross * ux * ux * uy * uy + own * std::pow(uy, 4), 1e-10);
}

TEST(FirstOrder, secondOrderTermsOfCorrelatedInputsAreRefused) {
  Model model = modelOf({normal(3, 0.5), normal(-2, 0.7)}, [](auto x) { return x[0] * x[1]; });
  model.correlations = {{0, 1, 0.5}};
  FirstOrderOptions second;
  second.secondOrder = true;
  EXPECT_EQ(firstOrder(model, second).error().code, ErrorCode::bad_use);
}

TEST(FirstOrder, fullCorrelationCancelsADifference) {
  Model model = modelOf({normal(3, 0.5, 4), normal(2, 0.5, 9)}, [](auto x) { return x[0] - x[1]; });
  model.correlations = {{0, 1, 1.0}};
  EXPECT_NEAR(estimateOf(model).standardUncertainty, 0, 1e-12);
  model.correlations = {{0, 1, -1.0}};
  const Estimate e = estimateOf(model);
  EXPECT_NEAR(e.standardUncertainty, 1, 1e-12);
  EXPECT_NEAR(e.degreesOfFreedom, 4, 1e-9);  // one contribution, with the fewest
}

TEST(FirstOrder, aFailingFunctionIsReportedWithTheInputThatWasMoved) {
  Model model = modelOf({normal(1, 0.5)}, {});
  model.function = [](std::span<const double> x, std::span<double> y) -> Result<void> {
    if (x[0] < 1) return fail(ErrorCode::bad_use, "no such bridge");
    y[0] = x[0];
    return {};
  };
  const auto result = firstOrder(model);
  ASSERT_FALSE(result);
  EXPECT_NE(result.error().text().find("X1"), std::string::npos);
  EXPECT_NE(result.error().text().find("no such bridge"), std::string::npos);
}

TEST(Check, namesTheInputThatMakesNoSense) {
  for (const Distribution& bad :
       {normal(std::nan(""), 1), normal(0, -1), normal(0, kInfinity), normal(0, 1, 0)}) {
    const auto result = check(modelOf({normal(0, 1), bad}, [](auto x) { return x[0]; }));
    ASSERT_FALSE(result);
    EXPECT_NE(result.error().text().find("X2"), std::string::npos);
  }
}

TEST(Check, refusesCorrelationsThatCannotBe) {
  Model model = modelOf({normal(0, 1), normal(0, 1), normal(0, 1)}, [](auto x) { return x[0]; });
  model.correlations = {{0, 1, 0.9}, {1, 2, 0.9}, {0, 2, -0.9}};
  EXPECT_FALSE(check(model));
  model.correlations = {{0, 1, 0.9}, {1, 2, 0.9}, {0, 2, 0.9}};
  EXPECT_TRUE(check(model));
  model.correlations = {{0, 0, 0.5}};
  EXPECT_FALSE(check(model));
  model.correlations = {{0, 3, 0.5}};
  EXPECT_FALSE(check(model));
  model.correlations = {{0, 1, 1.1}};
  EXPECT_FALSE(check(model));
}

TEST(ShapedHalfWidth, knowsARectangleAndStudent) {
  const auto sum = [](auto x) { return x[0] + x[1]; };
  const Model rectangle = modelOf({rectangular(0, 1), normal(0, 1e-9)}, sum);
  EXPECT_NEAR(shapedHalfWidth(rectangle, estimateOf(rectangle)), 0.9545, 1e-3);
  const Model few = modelOf({normal(0, 1, 4), normal(0, 0)}, sum);
  EXPECT_NEAR(shapedHalfWidth(few, estimateOf(few)), studentFactor(4), 3e-3);
  Model together = modelOf({normal(0, 1), normal(0, 1)}, sum);
  together.correlations = {{0, 1, 1.0}};
  EXPECT_NEAR(shapedHalfWidth(together, estimateOf(together)), 2 * studentFactor(kInfinity), 4e-3);
}

TEST(Join, inputsOfOneSourceAreOneQuantity) {
  const auto difference = [](auto x) { return x[0] - x[1]; };
  Model one = modelOf({normal(3, 0.5), normal(2, 0.1)}, difference);
  Model other = modelOf({normal(2, 0.2), normal(3, 0.5)}, difference);
  one.inputs[0].source = other.inputs[1].source = "resistor";
  one.correlations = {{0, 1, 0.3}};
  const Model joint = join({{"A", one}, {"B", other}});
  ASSERT_EQ(joint.inputs.size(), 3u);
  EXPECT_EQ(joint.inputs[0].quantity, "X1");
  EXPECT_EQ(joint.inputs[1].quantity, "A: X2");
  EXPECT_EQ(joint.inputs[2].quantity, "B: X1");
  const auto result = firstOrder(joint);
  ASSERT_TRUE(result) << result.error().text();
  ASSERT_EQ(result->outputs.size(), 2u);
  EXPECT_EQ(result->outputs[0].value, 1);
  EXPECT_EQ(result->outputs[1].value, -1);
  // A = r - a, B = b - r: cov = -u_r^2 + 0.3 u_r u_a.
  EXPECT_NEAR(result->covariance(0, 1), -0.25 + 0.3 * 0.5 * 0.1, 1e-12);
  EXPECT_NEAR(result->covariance(1, 1), 0.25 + 0.04, 1e-12);
}

TEST(CorrelatedGroups, followChains) {
  Model model = modelOf(std::vector<Distribution>(5, normal(0, 1)), [](auto x) { return x[0]; });
  model.correlations = {{4, 2, 0.1}, {2, 0, 0.1}, {1, 3, 0.0}};
  const std::vector<std::vector<std::size_t>> expected{{0, 2, 4}, {1}, {3}};
  EXPECT_EQ(correlatedGroups(model), expected);
}

}  // namespace
}  // namespace shuntwright::metrology
