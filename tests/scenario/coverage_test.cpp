// proves P-11
#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>

#include "tests/support/virtual_bench.h"
#include "tools/cli/demo_run.h"

namespace shuntwright {
namespace {

// The short form of `tools/dev/prove demo`: with 8 seeds x 30 channels the share inside has a standard deviation
// of 1.4 % (binomial) about 95.45 %; three of them to either side are allowed. The median error of 200 seeds
// is 0.065 %, and that of 240 channels scatters by less than a hundredth of a percent.
TEST(HonestUncertainty, theTruthLiesInsideTheStatedIntervalAsOftenAsItSays) {
  const auto rack = test::shippedRack("gantry_beam.toml");
  const auto scenario = cli::demoScenario(rack);
  ASSERT_TRUE(scenario.has_value()) << scenario.error().text();
  std::vector<double> errors, before;
  int inside = 0;
  for (std::uint64_t seed = 1001; seed <= 1008; ++seed) {
    cli::DemoOptions options;
    options.seed = seed;
    auto run = cli::runDemo(rack, *scenario, options);
    ASSERT_TRUE(run.has_value()) << run.error().text();
    EXPECT_TRUE(run->relaysOpen);
    EXPECT_EQ(run->lost, 0u);
    for (const auto& c : run->channels) {
      errors.push_back(std::abs(c.correctedError_percent));
      before.push_back(std::abs(c.uncorrectedError_percent));
      inside += c.insideUncertainty();
    }
  }
  const double share = 100.0 * inside / static_cast<double>(errors.size());
  EXPECT_GE(share, 95.45 - 4.05);
  EXPECT_LE(share, 95.45 + 4.05);
  std::nth_element(errors.begin(), errors.begin() + static_cast<std::ptrdiff_t>(errors.size() / 2), errors.end());
  std::nth_element(before.begin(), before.begin() + static_cast<std::ptrdiff_t>(before.size() / 2), before.end());
  EXPECT_LE(errors[errors.size() / 2], 0.1);
  EXPECT_GE(before[before.size() / 2] / errors[errors.size() / 2], 12);
}

}  // namespace
}  // namespace shuntwright
