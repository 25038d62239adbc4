#include "driver/description/wiring.h"

#include <gtest/gtest.h>

namespace {

using namespace shuntwright::description;
using enum Terminal;
using enum CircuitKind;

TEST(Wiring, namesComeBack) {
  EXPECT_EQ(circuitNames().size(), 10u);
  for (const std::string_view word : circuitNames()) EXPECT_EQ(name(circuitNamed(word).value()), word);
  for (const Terminal t : {exc_plus, exc_minus, sig_plus, sig_minus, comp, sense_plus, sense_minus})
    EXPECT_EQ(terminalNamed(name(t)), t);
  EXPECT_EQ(circuitNamed("half poisson"), half_poisson);
  EXPECT_EQ(circuitNamed("quarter"), std::nullopt);
  EXPECT_EQ(terminalNamed("EXC"), std::nullopt);
}

TEST(Wiring, everyCircuitHasItsLeads) {
  using T = std::vector<Terminal>;
  EXPECT_EQ(leadsOf(quarter_2_wire, false), (T{exc_minus, sig_plus}));
  EXPECT_EQ(leadsOf(quarter_3_wire, false), (T{exc_minus, comp, sig_plus}));
  EXPECT_EQ(leadsOf(half_bending, false), (T{exc_plus, sig_plus, exc_minus}));
  EXPECT_EQ(leadsOf(half_opposite, false), (T{exc_plus, exc_minus, sig_plus, sig_minus}));
  EXPECT_EQ(leadsOf(full_shear, false), (T{exc_plus, exc_minus, sig_plus, sig_minus}));
  EXPECT_EQ(leadsOf(transducer, true),
            (T{exc_plus, exc_minus, sig_plus, sig_minus, sense_plus, sense_minus}));
  EXPECT_EQ(leadsOf(quarter_3_wire, true).size(), 3u);  // nothing to sense
}

TEST(Wiring, terminalsAtTheGaugeAreTheEndsOfTheLeads) {
  for (const std::string_view word : circuitNames()) {
    const CircuitKind kind = *circuitNamed(word);
    EXPECT_EQ(terminalsOf(kind, false, Side::gauge), leadsOf(kind, false));
    for (const Terminal t : {exc_plus, exc_minus, sig_plus, sig_minus}) {
      const auto all = terminalsOf(kind, false, Side::instrument);
      EXPECT_EQ(std::count(all.begin(), all.end(), t), 1) << word;
    }
  }
}

TEST(Wiring, leadsThatMeetAtTheGaugeAreOnePoint) {
  EXPECT_TRUE(onePoint(comp, sig_plus, Side::gauge));
  EXPECT_TRUE(onePoint(sense_plus, exc_plus, Side::gauge));
  EXPECT_TRUE(onePoint(exc_minus, sense_minus, Side::gauge));
  EXPECT_FALSE(onePoint(comp, sig_plus, Side::instrument));
  EXPECT_FALSE(onePoint(exc_plus, sig_plus, Side::gauge));
  EXPECT_TRUE(onePoint(exc_plus, exc_plus, Side::instrument));
}

// Small-strain outputs in units of x/4, x = K e, from the four-arm equation (r = (x1 - x2 + x3 - x4)/4):
// 1, 2, 1 + nu, 2, 4, 2(1 + nu) for quarter, bending, Poisson, opposite, full bending, full Poisson.
TEST(Wiring, armWeightsGiveTheKnownSensitivities) {
  const double nu = 0.3;
  const auto output = [&](CircuitKind kind) {
    const auto w = armWeights(kind, nu);
    return w[0] - w[1] + w[2] - w[3];
  };
  EXPECT_DOUBLE_EQ(output(quarter_2_wire), 1);
  EXPECT_DOUBLE_EQ(output(quarter_3_wire), 1);
  EXPECT_DOUBLE_EQ(output(half_bending), 2);
  EXPECT_DOUBLE_EQ(output(half_poisson), 1 + nu);
  EXPECT_DOUBLE_EQ(output(half_opposite), 2);
  EXPECT_DOUBLE_EQ(output(full_bending), 4);
  EXPECT_DOUBLE_EQ(output(full_poisson), 2 * (1 + nu));
  EXPECT_DOUBLE_EQ(output(full_bending_poisson), 2 * (1 + nu));
  EXPECT_DOUBLE_EQ(output(full_shear), 4);
  EXPECT_DOUBLE_EQ(output(transducer), 4);
}

}  // namespace
