#include "driver/bridge/shunt_step.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "tests/driver/bridge/circuits.h"

namespace shuntwright::bridge {
namespace {

using namespace test;

ShuntStep predicted(const Circuit& c, const ShuntPath& p, double standing_microstrain = 0) {
  auto step = predictStep(c, standing_microstrain * microstrain, p);
  EXPECT_TRUE(step) << step.error().text();
  return step.value_or(ShuntStep{});
}

double stepOhm(double R, double lead, const ShuntPath& p) {
  const auto step = stepOf(circuit(CircuitKind::quarter_3_wire, R, lead), {}, p);
  return step ? step->in(volt_per_volt) : std::nan("");
}

TEST(ShuntStep, CompletionShuntCarriesTheLeadLoss) {
  for (double lead : {0.0, 1.0, 5.0, 10.0, 25.0}) {
    const auto s = predicted(circuit(CircuitKind::quarter_3_wire, 120, lead), acrossCompletion(59880));
    EXPECT_TRUE(s.carriesLeadLoss) << lead;
    // slope of x/(4(1+p)+2x) at 0 is 1/(4(1+p)): minus 100/(R + R_L) percent per ohm
    EXPECT_NEAR(s.strainPercentPerOhm, -100 / (120 + lead), 1e-9);
    // step -d/(2(2R + 2R_L + d)): minus 200/(2R + 2R_L + d)
    const double d = -120.0 * 120.0 / (120.0 + 59880.0);
    EXPECT_NEAR(s.stepPercentPerOhm, -200 / (240 + 2 * lead + d), 1e-9);
    EXPECT_GT(s.simulated, units::Strain{}) << "across the adjacent arm reads as tension";
  }
}

TEST(ShuntStep, GaugeShuntCarriesTheLeadLossAndReadsAsCompression) {
  for (double lead : {0.0, 1.0, 5.0, 10.0, 25.0}) {
    const auto s = predicted(circuit(CircuitKind::quarter_3_wire, 120, lead), acrossTabs(59880));
    EXPECT_TRUE(s.carriesLeadLoss);
    EXPECT_NEAR(s.simulated.in(microstrain), -1000, 1e-8);
  }
}

TEST(ShuntStep, HalfBridgeShuntCarriesNone) {
  for (double lead : {0.0, 1.0, 5.0, 10.0, 25.0}) {
    for (const auto& p : {acrossUpperHalfBridge(59880), acrossLowerHalfBridge(59880)}) {
      const auto s = predicted(circuit(CircuitKind::quarter_3_wire, 120, lead), p);
      EXPECT_EQ(s.stepPercentPerOhm, 0);
      EXPECT_LT(s.strainPercentPerOhm, -0.68);
      EXPECT_FALSE(s.carriesLeadLoss);
    }
  }
}

// 3.4, 17 and 35 % too large at 1, 5 and 10 ohm on 120 ohm, about 4 R_L/R.
TEST(ShuntStep, ShuntThroughTheSenseLeadOverCarries) {
  const auto excess = [](double lead) {
    return 100 * (stepOhm(120, lead, throughSenseLead(59880)) / stepOhm(120, lead, acrossTabs(59880)) - 1);
  };
  EXPECT_NEAR(excess(0), 0, 1e-9);
  EXPECT_NEAR(excess(1), 3.4, 0.05);
  EXPECT_NEAR(excess(5), 17, 0.5);
  EXPECT_NEAR(excess(10), 35, 0.5);
  for (double lead : {0.0, 1.0, 5.0, 10.0}) {
    const auto s = predicted(circuit(CircuitKind::quarter_3_wire, 120, lead), throughSenseLead(59880));
    EXPECT_FALSE(s.carriesLeadLoss);
    EXPECT_GT(s.stepPercentPerOhm, 0) << "grows with the leads while the response to strain shrinks";
    // step -(R+3R_L)/(2(2R_c+R+3R_L)): logarithmic derivative by hand
    const double a = 120 + 3 * lead;
    EXPECT_NEAR(s.stepPercentPerOhm, 300 / a - 300 / (2 * 59880.0 + a), 1e-9);
  }
}

TEST(ShuntStep, CompletionTerminalShuntIsTooLargeByExactly1Plus2p) {
  for (double R : {120.0, 350.0, 1000.0}) {
    for (double lead : {0.0, 1.0, 5.0, 10.0, 25.0}) {
      for (double shunt : {5e3, 59880.0, 1e6}) {
        const double iv = stepOhm(R, lead, fromCompletionTerminal(shunt));
        const double ii = stepOhm(R, lead, acrossCompletion(shunt));
        EXPECT_NEAR(iv, -(1 + 2 * lead / R) * ii, 4e-16) << "to the rounding of two ratios";
      }
      const Circuit c = circuit(CircuitKind::quarter_3_wire, R, lead);
      EXPECT_FALSE(predicted(c, fromCompletionTerminal(59880)).carriesLeadLoss);
    }
  }
}

// -(iv)/(ii) = (R_g + R_L1 + R_L2)/R_d for any shunt and any gauge, leads unequal.
TEST(ShuntStep, RatioOfTwoNearEndStepsGivesGaugePlusLeads) {
  Circuit c = circuit(CircuitKind::quarter_3_wire, 350);
  c.arms[0].resistance = 350.9 * ohm;
  c.lead(Terminal::exc_minus) = 6.0 * ohm;
  c.lead(Terminal::comp) = 5.0 * ohm;
  c.lead(Terminal::sig_plus) = 4.0 * ohm;
  const double iv = predicted(c, fromCompletionTerminal(1e5)).step.in(volt_per_volt);
  const double ii = predicted(c, acrossCompletion(1e5)).step.in(volt_per_volt);
  EXPECT_NEAR(-iv / ii, (350.9 + 6 + 5) / 350, 1e-12);
}

// Unequal leads, 350 ohm: printed values (computed).
TEST(ShuntStep, UnequalLeadsShiftZeroAndOnlyTheSenseLeadMovesTheSenseShunt) {
  const auto withLeads = [](double excMinus, double comp, double sigPlus) {
    Circuit c = circuit(CircuitKind::quarter_3_wire, 350);
    c.lead(Terminal::exc_minus) = excMinus * ohm;
    c.lead(Terminal::comp) = comp * ohm;
    c.lead(Terminal::sig_plus) = sigPlus * ohm;
    return c;
  };
  EXPECT_NEAR(millivolts(withLeads(6, 5, 5), 0), 0.70323488, 5e-9);
  EXPECT_NEAR(millivolts(withLeads(5, 6, 5), 0), -0.70323488, 5e-9);
  EXPECT_NEAR(millivolts(withLeads(5, 5, 6), 0), 0, 1e-12);
  const auto step = [&](double sigPlus, const ShuntPath& p) {
    return predicted(withLeads(5, 5, sigPlus), p).step.in(millivolt_per_volt);
  };
  EXPECT_NEAR(step(5, throughSenseLead(174650)), -0.521928131, 6e-10);
  EXPECT_NEAR(step(6, throughSenseLead(174650)), -0.524785010, 6e-10);
  for (const auto& p : {acrossTabs(174650), acrossCompletion(174650), fromCompletionTerminal(174650)}) {
    EXPECT_NEAR(step(6, p), step(5, p), 1e-12);
  }
}

// Preload, 350 ohm, no leads: printed values (computed).
TEST(ShuntStep, IsPredictedAtTheStandingStrain) {
  const Circuit c = circuit(CircuitKind::quarter_3_wire, 350);
  const auto step = [&](double standing, const ShuntPath& p) {
    return predicted(c, p, standing).step.in(millivolt_per_volt);
  };
  EXPECT_NEAR(step(+1000, acrossTabs(174650)), -0.501500500, 6e-10);
  EXPECT_NEAR(step(+5000, acrossTabs(174650)), -0.505490476, 6e-10);
  EXPECT_NEAR(step(-2000, acrossTabs(174650)), -0.498497496, 6e-10);
  EXPECT_NEAR(step(+1000, acrossCompletion(174650)), 0.500499500, 6e-10);
  EXPECT_NEAR(step(+5000, acrossCompletion(174650)), 0.500485620, 6e-10);
  EXPECT_NEAR(step(-2000, acrossCompletion(174650)), 0.500499494, 6e-10);
  EXPECT_NEAR(step(+5000, acrossUpperHalfBridge(174650)), step(0, acrossUpperHalfBridge(174650)), 1e-12);
}

TEST(ShuntStep, SimulatedStrainGivesTheSameStepFromTheSameState) {
  for (CircuitKind kind : kGaugeCircuits) {
    const Circuit c = circuit(kind, 120, 3);
    const auto p = path(Terminal::sig_plus, Terminal::exc_minus, Side::instrument, 59880);
    for (double standing : {-2000.0, 0.0, 3000.0}) {
      const auto s = predicted(c, p, standing);
      const double by = millivolts(c, standing + s.simulated.in(microstrain)) - millivolts(c, standing);
      EXPECT_NEAR(by, s.step.in(millivolt_per_volt), 1e-12) << description::name(kind);
      EXPECT_EQ(s.before.in(millivolt_per_volt), millivolts(c, standing));
      EXPECT_LT(s.simulated, units::Strain{});
    }
  }
}

// Near-end shunt on a 2-wire quarter bridge: about 1 + 4p of the same shunt at the gauge.
TEST(ShuntStep, NearEndShuntOnTwoWiresReadsAbout1Plus4p) {
  const Circuit c = circuit(CircuitKind::quarter_2_wire, 120, 1);
  const auto far = predicted(c, acrossTabs(59880)).step;
  const auto near = predicted(c, throughSenseLead(59880)).step;
  EXPECT_NEAR(near / far, 1 + 4.0 / 120, 4 * (1.0 / 120) * (1.0 / 120) * 1.1);
}

TEST(ShuntStep, SensedFullBridgeHasNoLeadLossToCarry) {
  Circuit c = circuit(CircuitKind::full_bending, 350, 5);
  c.inputResistance = 1.0 * units::gigaohm;
  const auto p = path(Terminal::sig_plus, Terminal::exc_minus, Side::gauge, 174650);
  EXPECT_TRUE(predicted(c, p).carriesLeadLoss);
  c.sensed = true;
  EXPECT_FALSE(predicted(c, p).carriesLeadLoss);
  EXPECT_NEAR(predicted(c, p).strainPercentPerOhm, 0, 1e-6);
}

TEST(ShuntStep, ShuntAcrossTheExcitationMovesNothing) {
  const auto s = predicted(circuit(CircuitKind::quarter_3_wire, 120, 5),
                           path(Terminal::exc_plus, Terminal::exc_minus, Side::instrument, 1e3));
  EXPECT_EQ(s.step, units::Ratio{});
  EXPECT_EQ(s.simulated, units::Strain{});
  EXPECT_FALSE(s.carriesLeadLoss);
}

TEST(ShuntStep, ErrorsAreThoseOfTheCircuitAndOfTheInverse) {
  const Circuit c = circuit(CircuitKind::quarter_3_wire);
  const auto missing =
      predictStep(c, {}, path(Terminal::exc_plus, Terminal::sense_plus, Side::instrument, 1e5));
  ASSERT_FALSE(missing);
  EXPECT_THAT(missing.error().text(), testing::HasSubstr("has no SENSE+ at the instrument"));
  const auto huge = predictStep(c, {}, acrossTabs(1));
  ASSERT_FALSE(huge);
  EXPECT_THAT(huge.error().text(), testing::HasSubstr("no strain within +-100000 microstrain"));
  EXPECT_TRUE(stepOf(c, {}, acrossTabs(1))) << "the step itself is well defined";
}

}  // namespace
}  // namespace shuntwright::bridge
