// proves P-12
// Worked examples of the Guide to the expression of uncertainty in measurement (JCGM 100:2008), through the
// engine that makes the project's own budgets. "quoted": seen in the documentation of a national institute's
// uncertainty library; "from memory": not looked up; "recomputed": 40-digit arithmetic of the same data.
#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <vector>

#include "driver/metrology/first_order.h"
#include "driver/metrology/least_squares.h"

namespace shuntwright::metrology {
namespace {

FirstOrderResult propagated(const Model& model, bool secondOrder = false) {
  FirstOrderOptions options;
  options.secondOrder = secondOrder;
  auto result = firstOrder(model, options);
  EXPECT_TRUE(result) << result.error().text();
  return result.value_or(FirstOrderResult{});
}

/// H.1: an end gauge of 50 mm by comparison, in nm: l = ls + d - ls (da t + as dt). Values from memory, the
/// components they give are those of the table.
Model endGauge() {
  Model model;
  model.inputs = {{"length of the standard", "nm", normal(50'000'623, 25, 18)},
                  {"difference", "nm", normal(215, 9.7, 25.6)},
                  {"difference of expansion coefficients", "1/K", rectangular(0, 1e-6, 50)},
                  {"temperature off 20 degC", "K", normal(-0.1, 0.41)},
                  {"expansion coefficient", "1/K", rectangular(11.5e-6, 2e-6)},
                  {"difference of temperatures", "K", rectangular(0, 0.05, 2)}};
  model.function = [](std::span<const double> x, std::span<double> y) -> Result<void> {
    y[0] = x[0] + x[1] - x[0] * (x[2] * x[3] + x[4] * x[5]);
    return {};
  };
  return model;
}

TEST(GumH1, componentsOfTheEndGauge) {
  const Estimate l = propagated(endGauge()).outputs.front();
  EXPECT_NEAR(l.value, 50'000'838, 0.5);  // quoted
  const struct {
    std::size_t input;
    double nm, halfDigit;
  } table[] = {{0, 25, 0.5}, {1, 9.7, 0.05}, {2, 2.9, 0.05}, {3, 0, 1e-6}, {4, 0, 1e-6}, {5, 16.6, 0.05}};
  for (const auto& row : table) {
    EXPECT_NEAR(l.contributions[row.input].uncertainty, row.nm, row.halfDigit) << row.input;
  }
  EXPECT_NEAR(l.standardUncertainty, 32, 0.5);  // quoted
}

TEST(GumH1, degreesOfFreedomAndExpandedUncertaintyAt99Percent) {
  const Estimate l = propagated(endGauge()).outputs.front();
  EXPECT_NEAR(l.degreesOfFreedom, 16.7, 0.1);  // from memory; 16.76 recomputed from the rounded components
  EXPECT_NEAR(studentFactor(16, 0.99), 2.92, 0.005);  // from memory, truncated to 16 as there
  EXPECT_NEAR(studentFactor(16, 0.99) * l.standardUncertainty, 93, 0.6);  // from memory
}

// H.1.7: the product terms are 11.7 and 1.7 nm and raise u to 34 nm (from memory).
TEST(GumH1, secondOrderTerms) {
  const Estimate l = propagated(endGauge(), true).outputs.front();
  EXPECT_NEAR(std::sqrt(l.secondOrderVariance), std::hypot(11.7, 1.7), 0.2);
  EXPECT_NEAR(l.standardUncertainty, 34, 0.5);
}

// H.2: resistance, reactance and impedance from voltage, current and phase read together five times (readings
// from memory, their means, uncertainties and correlations quoted).
TEST(GumH2, resistanceReactanceAndImpedanceWithTheirCorrelations) {
  const std::vector<ObservedQuantity> observed{{"voltage", "V", {5.007, 4.994, 5.005, 4.990, 4.999}},
                                               {"current", "mA", {19.663, 19.639, 19.640, 19.685, 19.678}},
                                               {"phase", "rad", {1.0456, 1.0438, 1.0468, 1.0428, 1.0433}}};
  Model model;
  ASSERT_TRUE(addObservedTogether(model, observed));
  const double quotedCorrelations[] = {-0.36, 0.86, -0.65};  // V I, V phi, I phi
  ASSERT_EQ(model.correlations.size(), 3u);
  for (int i = 0; i < 3; ++i)
    EXPECT_NEAR(model.correlations[i].coefficient, quotedCorrelations[i], 0.006) << i;

  model.outputs = 3;
  model.function = [](std::span<const double> x, std::span<double> y) -> Result<void> {
    const double z = 1000 * x[0] / x[1];
    y[0] = z * std::cos(x[2]);
    y[1] = z * std::sin(x[2]);
    y[2] = z;
    return {};
  };
  const FirstOrderResult result = propagated(model);
  const struct {
    double quoted, quotedHalfDigit, value, u;  // the last two recomputed
  } table[] = {{127.732, 5e-4, 127.73217, 0.0710714},
               {219.85, 5e-3, 219.846512, 0.295582},
               {254.26, 5e-3, 254.259702, 0.236336}};
  for (std::size_t k = 0; k < 3; ++k) {
    EXPECT_NEAR(result.outputs[k].value, table[k].quoted, table[k].quotedHalfDigit);
    EXPECT_NEAR(result.outputs[k].value, table[k].value, 6e-6);
    EXPECT_NEAR(result.outputs[k].standardUncertainty, table[k].u, 1e-6);
    EXPECT_NEAR(result.outputs[k].degreesOfFreedom, 4, 1e-9);  // one set of five readings
  }
  const auto r = [&](std::size_t k, std::size_t l) {
    return result.covariance(k, l) /
           (result.outputs[k].standardUncertainty * result.outputs[l].standardUncertainty);
  };
  EXPECT_NEAR(r(0, 1), -0.58843, 1e-5);  // recomputed
  EXPECT_NEAR(r(0, 2), -0.48526, 1e-5);
  EXPECT_NEAR(r(1, 2), 0.99251, 1e-5);
}

// H.3, table H.6: correction of a thermometer by a straight line about 20 degC (data and results quoted; s
// from memory; full digits recomputed).
TEST(GumH3, calibrationLineOfAThermometer) {
  const std::vector<double> t{21.521, 22.012, 22.512, 23.003, 23.507, 23.999,
                              24.513, 25.002, 25.503, 26.010, 26.511};
  const std::vector<double> b{-.171, -.169, -.166, -.159, -.164, -.165, -.156, -.157, -.159, -.161, -.160};
  std::vector<double> off;
  for (const double value : t) off.push_back(value - 20);
  const auto fit = fitLinear(straightLine(off), b);
  ASSERT_TRUE(fit) << fit.error().text();
  EXPECT_NEAR(fit->parameters[0], -0.1712, 5e-5);
  EXPECT_NEAR(fit->parameters[1], 0.00218, 5e-6);
  EXPECT_NEAR(fit->standardUncertainty(0), 0.0029, 5e-5);
  EXPECT_NEAR(fit->standardUncertainty(1), 0.00067, 5e-6);
  EXPECT_NEAR(fit->correlation(0, 1), -0.930, 5e-4);
  EXPECT_NEAR(fit->residualDeviation(), 0.0035, 5e-5);
  EXPECT_NEAR(fit->parameters[0], -0.171203790131, 1e-12);
  EXPECT_NEAR(fit->parameters[1], 0.00218269773989, 1e-14);
  EXPECT_NEAR(fit->standardUncertainty(0), 0.00287759783516, 1e-14);
  EXPECT_NEAR(fit->standardUncertainty(1), 0.000667938773228, 1e-15);
  EXPECT_NEAR(fit->correlation(0, 1), -0.930429603093, 1e-12);

  // The correction at 30 degC, from the fit itself and from intercept and slope as correlated inputs.
  const double row[] = {1, 10};
  const FittedValue at30 = fit->at(row);
  EXPECT_NEAR(at30.value, -0.1494, 5e-5);
  EXPECT_NEAR(at30.standardUncertainty, 0.0041, 5e-5);
  Model model;
  for (const std::size_t k : {0, 1}) {
    model.inputs.push_back(
        {k == 0 ? "y1" : "y2", "", normal(fit->parameters[k], fit->standardUncertainty(k), 9)});
  }
  model.correlations = {{0, 1, fit->correlation(0, 1)}};
  model.function = [](std::span<const double> x, std::span<double> y) -> Result<void> {
    y[0] = x[0] + 10 * x[1];
    return {};
  };
  const Estimate e = propagated(model).outputs.front();
  EXPECT_NEAR(e.value, -0.149376812732, 1e-12);
  EXPECT_NEAR(e.standardUncertainty, 0.00413859575285, 1e-13);
  EXPECT_NEAR(e.degreesOfFreedom, 9, 1e-9);
}

// 5.2.2, example: ten resistors of 1000 ohm compared with one standard (u 100 mohm) and put in series have
// u = 1 ohm, not 0.32 ohm (from memory).
TEST(Gum522, resistorsCalibratedAgainstOneStandard) {
  Model model;
  for (int i = 0; i < 10; ++i)
    model.inputs.push_back({"resistor " + std::to_string(i), "ohm", normal(1000, 0.1)});
  model.function = [](std::span<const double> x, std::span<double> y) -> Result<void> {
    for (const double r : x) y[0] += r;
    return {};
  };
  EXPECT_NEAR(propagated(model).outputs.front().standardUncertainty, 0.32, 0.005);
  for (std::size_t i = 0; i < 10; ++i) {
    for (std::size_t j = i + 1; j < 10; ++j) model.correlations.push_back({i, j, 1.0});
  }
  EXPECT_NEAR(propagated(model).outputs.front().standardUncertainty, 1, 1e-9);
}

// G.4.1, example: Y = b X1 X2 X3, relative u 0.25, 0.57, 0.82 % from n = 10, 5, 15: u_c 1.03 %, nu_eff 19.0,
// t95(19) 2.09, U95 2.2 % (from memory; 1.02946588, 18.99874, 2.0930241 recomputed). The differences are
// taken at one whole standard uncertainty, and the product is linear in each factor.
TEST(GumG41, productOfThreeFactors) {
  Model model;
  model.inputs = {{"X1", "", normal(2, 2 * 0.0025, 9)},
                  {"X2", "", normal(3, 3 * 0.0057, 4)},
                  {"X3", "", normal(5, 5 * 0.0082, 14)}};
  model.function = [](std::span<const double> x, std::span<double> y) -> Result<void> {
    y[0] = 7 * x[0] * x[1] * x[2];
    return {};
  };
  const Estimate e = propagated(model).outputs.front();
  EXPECT_NEAR(100 * e.standardUncertainty / e.value, 1.02946588, 1e-8);
  EXPECT_NEAR(e.degreesOfFreedom, 18.99874, 1e-5);
  EXPECT_NEAR(e.coverageFactor(0.95), 2.09, 0.005);
  EXPECT_NEAR(100 * e.expandedUncertainty(0.95) / e.value, 2.2, 0.05);
}

}  // namespace
}  // namespace shuntwright::metrology
