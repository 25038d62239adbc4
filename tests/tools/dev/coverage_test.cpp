// proves P-11
// The short form of `tools/dev/prove coverage`. What the full one shows with 10 000 racks a circuit to a
// percent, a hundred racks show to the binomial scatter of their share: 2.1 % standard deviation about 95.45
// %.
#include "tools/dev/coverage.h"

#include <gtest/gtest.h>

#include <cmath>

#include "tests/support/virtual_bench.h"
#include "tools/dev/dominance.h"

namespace shuntwright::dev {
namespace {

class CoverageOf : public ::testing::TestWithParam<const char*> {};

TEST_P(CoverageOf, theTruthLiesInsideAsOftenAsStated) {
  const auto rack = test::shippedRack("every_circuit.toml");
  CoverageOptions options;
  options.racks = 160;
  options.trials = 400;
  const double deviation = 100 * std::sqrt(0.9545 * 0.0455 / options.racks);
  const auto found = coverageOf(rack, GetParam(), options);
  ASSERT_TRUE(found) << found.error().text();
  for (const auto& c : *found) {
    SCOPED_TRACE(c.quantity);
    EXPECT_GE(c.gum_percent, 95.45 - 4 * deviation);
    EXPECT_LE(c.medianWidth, 1.3);
    if (std::isnan(c.monteCarlo_percent)) continue;
    EXPECT_GE(c.monteCarlo_percent, 95.45 - 4 * deviation);
  }
}

INSTANTIATE_TEST_SUITE_P(Circuits, CoverageOf,
                         ::testing::Values("Q2", "Q3-tab", "HB", "HP", "FP", "LC", "Q3-two", "Q3-id"),
                         [](const auto& circuit) {
                           std::string name = circuit.param;
                           std::erase(name, '-');
                           return name;
                         });

// A budget can only be wrong about what it knows. Each of its inputs in turn outweighs all others; stated at
// half of what it is, the truth has to fall outside too often.
TEST(Dominance, halvingAnInputOfTheBudgetIsSeen) {
  constexpr int kRacks = 120;
  const double deviation = 100 * std::sqrt(0.9545 * 0.0455 / kRacks);
  const auto found = dominanceOf(test::shippedRack("every_circuit.toml"), kRacks, 7);
  ASSERT_TRUE(found) << found.error().text();
  EXPECT_GE(found->size(), 20u);
  for (const auto& campaign : *found) {
    SCOPED_TRACE(campaign.input);
    EXPECT_GE(campaign.stated_percent, 95.45 - 4 * deviation);
    EXPECT_LT(campaign.halved_percent, 95.45 - 4 * deviation);
  }
}

}  // namespace
}  // namespace shuntwright::dev
