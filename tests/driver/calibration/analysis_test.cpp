#include "driver/calibration/analysis.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>

#include "driver/calibration/channel_model.h"
#include "driver/core/random.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright::calibration {
namespace {

using namespace units;
using namespace std::chrono_literals;

Window windowAt(Nanoseconds start, double mean_V_per_V) {
  Window w;
  w.mean = mean_V_per_V * volt_per_volt;
  w.deviation = 2e-8 * volt_per_volt;
  w.samples = 50;
  w.start = Instant{} + start;
  w.end = w.start + 500ms;
  return w;
}

/// What the channels of the small bench would read if they were just as described.
class Analysis : public ::testing::Test {
 protected:
  Analysis() : rack(test::shippedRack("small_bench.toml")) {}

  description::Channel& channel(const std::string& name) {
    return *std::find_if(rack.channels.begin(), rack.channels.end(),
                         [&](const auto& c) { return c.name == name; });
  }

  ChannelReadings ideal(const description::Channel& c) const {
    ChannelReadings readings;
    const auto prediction = predictScale(modelOf(rack, c), {});
    EXPECT_TRUE(prediction.has_value());
    for (const auto step : prediction->steps) {
      ShuntReadings shunt;
      shunt.opened = {windowAt(0s, 0), windowAt(2s, 0), windowAt(4s, 0)};
      shunt.closed = {windowAt(1s, step.in(volt_per_volt)), windowAt(3s, step.in(volt_per_volt))};
      readings.shunts.push_back(shunt);
    }
    readings.zero = windowAt(5s, 0);
    return readings;
  }

  static bool finds(const ChannelResult& result, const std::string& code) {
    return std::any_of(result.findings.begin(), result.findings.end(),
                       [&](const auto& f) { return f.code == code; });
  }
  static const BudgetLine* line(const ChannelResult& result, const std::string& quantity) {
    const auto& lines = result.budget.lines;
    const auto found =
        std::find_if(lines.begin(), lines.end(), [&](const auto& l) { return l.quantity == quantity; });
    return found == lines.end() ? nullptr : &*found;
  }

  description::Rack rack;
};

TEST_F(Analysis, idealReadingsPassWithASpanOfOne) {
  const auto result = analyse(rack, channel("Q3"), ideal(channel("Q3")));
  EXPECT_EQ(result.verdict, Verdict::pass);
  EXPECT_NEAR(result.spanRatio, 1, 1e-9);
}

// Samples of a first-order filter have the autocorrelation rho^k (textbook: AR(1)); white ones none.
TEST(Correlation, isThatOfTheSamplesAndNoMoreThanTheFilters) {
  const auto seen = [](double rho, double most) {
    Random random(4);
    std::vector<Window> windows;
    double y = 0;
    for (int w = 0; w < 40; ++w) {
      WindowBuilder builder;
      for (int k = 0; k < 100; ++k) {
        y = rho * y + std::sqrt(1 - rho * rho) * random.normal();
        builder.add(Instant{} + (100 * w + k) * 10ms, static_cast<float>(1e-6 * y), 0);
      }
      windows.push_back(builder.window());
    }
    return correlationSeen(windows, most);
  };
  EXPECT_NEAR(seen(0, 3), 1, 0.1);
  EXPECT_NEAR(seen(0.3, 3), 1.3 / 0.7, 0.2);
  EXPECT_DOUBLE_EQ(seen(0.8, 3), 3);
  EXPECT_DOUBLE_EQ(correlationSeen({}, 2), 2);
}

TEST(Steps, aLinearDriftIsRemovedHoweverUnequalTheWaits) {
  const double drift_per_s = 1e-6, step = 1e-3;
  const auto at = [&](Nanoseconds start, bool closed) {
    return windowAt(start, (closed ? step : 0) + drift_per_s * (seconds(start) + 0.25));
  };
  ShuntReadings readings;
  readings.opened = {at(0s, false), at(9s, false), at(11s, false)};
  readings.closed = {at(2s, true), at(10s, true)};
  const auto steps = stepsOf(readings);
  ASSERT_EQ(steps.size(), 2u);
  for (const auto one : steps) EXPECT_NEAR(one.in(volt_per_volt), step, 1e-15);
}

TEST_F(Analysis, aRelayThatWouldNotWorkDoesNotPullTheSpanOfTheOtherShunt) {
  auto& two = channel("Q3");
  two.shunts.push_back(two.shunts.front());
  two.shunts.back().name = "second";
  auto readings = ideal(two);
  readings.shunts[1].closed.clear();
  readings.shunts[1].opened.resize(1);
  readings.shunts[1].relayError = Error(ErrorCode::device_error, "relay does not close");
  const auto result = analyse(rack, two, readings);
  EXPECT_EQ(result.verdict, Verdict::fail);
  EXPECT_NEAR(result.spanRatio, 1, 1e-9);
  EXPECT_TRUE(result.shunts[0].measured());
  EXPECT_FALSE(result.shunts[1].measured());
  EXPECT_GT(result.budget.expandedUncertainty_percent, 0);
}

TEST_F(Analysis, aStepThatIsMissingIsToldOnceAndItsSpreadNotAtAll) {
  auto readings = ideal(channel("Q3"));
  readings.shunts[0].closed = {windowAt(1s, 1e-9), windowAt(3s, 3e-9)};  // differ by more than their mean
  const auto result = analyse(rack, channel("Q3"), readings);
  EXPECT_TRUE(finds(result, "step-missing"));
  EXPECT_FALSE(finds(result, "not-repeatable"));
  EXPECT_NE(result.findings.front().message.find("shunt \"completion\""), std::string::npos)
      << result.findings.front().message;
}

TEST_F(Analysis, aZeroWithoutSamplesIsNoZeroOfNought) {
  auto readings = ideal(channel("Q3"));
  readings.zero->samples = 0;
  readings.zero->missing = 50;
  const auto result = analyse(rack, channel("Q3"), readings);
  EXPECT_TRUE(finds(result, "no-samples"));
  EXPECT_EQ(result.verdict, Verdict::fail);
}

TEST_F(Analysis, lostSamplesAreCountedAndManyAreAFinding) {
  auto readings = ideal(channel("Q3"));
  readings.shunts[0].closed[0].lost = 2;
  readings.zero->lost = 1;
  auto result = analyse(rack, channel("Q3"), readings);
  EXPECT_EQ(result.lostSamples, 3);
  EXPECT_EQ(result.verdict, Verdict::pass);
  readings.shunts[0].closed[1].lost = 60;
  result = analyse(rack, channel("Q3"), readings);
  EXPECT_TRUE(finds(result, "lost-samples"));
}

// Welch-Satterthwaite, GUM G.4.1 (V): degrees of freedom do not simply add up. One shunt's two repeats that
// scatter leave about one degree, however well the other shunt is known.
TEST_F(Analysis, degreesOfFreedomAreThoseOfTheScatterThatMatters) {
  auto& two = channel("Q3");
  two.shunts.push_back(two.shunts.front());
  two.shunts.back().name = "second";
  auto readings = ideal(two);
  readings.shunts[1].closed[0].mean = readings.shunts[1].closed[0].mean + 2e-6 * volt_per_volt;
  const auto result = analyse(rack, two, readings);
  const auto* noise = line(result, "noise and repeats of the steps");
  ASSERT_NE(noise, nullptr);
  EXPECT_NEAR(noise->degreesOfFreedom, 1, 0.01);
}

// The step of a near-end shunt across an arm goes with R_out / (4 R_C): 1 % of R_out is 1 % of the step,
// whatever the sensitivity on the certificate.
TEST_F(Analysis, aTransducersOutputResistanceIsALineOfItsBudget) {
  auto& cell = channel("F1");
  EXPECT_EQ(line(analyse(rack, cell, ideal(cell)), "output resistance of the transducer"), nullptr);
  cell.transducer->outputTolerance = 1.0 * percent;
  cell.transducer->inputTolerance = 1.0 * percent;
  const auto result = analyse(rack, cell, ideal(cell));
  const auto* output = line(result, "output resistance of the transducer");
  ASSERT_NE(output, nullptr);
  EXPECT_NEAR(output->contribution_percent, 1 / std::sqrt(3.0), 0.03);
  ASSERT_NE(line(result, "input resistance of the transducer"), nullptr);
}

}  // namespace
}  // namespace shuntwright::calibration
