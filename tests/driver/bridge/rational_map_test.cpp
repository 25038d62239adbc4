#include "driver/bridge/rational_map.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "tests/driver/bridge/circuits.h"

namespace shuntwright::bridge {
namespace {

using namespace test;

constexpr double kExact = 1e-14;  // m/m: rounding

FittedMap mapped(const Circuit& c, double centre_microstrain = 0) {
  auto m = mapOf(c, centre_microstrain * microstrain);
  EXPECT_TRUE(m) << m.error().text();
  return m.value_or(FittedMap{});
}

// x = 4r/(1-2r), so strain = (4/K) r/(1 - 2r): p = 2, q = 0, w = -2 at K = 2 (Ohm's law).
TEST(RationalMap, OfTheQuarterBridgeIsItsTextbookInverse) {
  const auto m = mapped(circuit(CircuitKind::quarter_3_wire)).map;
  EXPECT_NEAR(m.p, 2, 1e-12);
  EXPECT_NEAR(m.q, 0, 1e-15);
  EXPECT_NEAR(m.w, -2, 1e-10);
}

// With equal leads x = 4(1+p) r/(1-2r).
TEST(RationalMap, OfTheThreeWireBridgeHasTheLeadLossInItsSlopeOnly) {
  const auto m = mapped(circuit(CircuitKind::quarter_3_wire, 120, 10)).map;
  EXPECT_NEAR(m.p, 2 * (1 + 10.0 / 120), 1e-12);
  EXPECT_NEAR(m.w, -2, 1e-10);
}

TEST(RationalMap, IsExactWhereTheRatioIsAMoebiusFunction) {
  for (CircuitKind kind : kGaugeCircuits) {
    const auto worst = mapped(circuit(kind, 350, 5)).worstError.in(units::strain);
    if (kind == CircuitKind::full_bending_poisson) continue;
    EXPECT_LT(worst, kExact) << description::name(kind);
  }
}

// r = x(1+nu)/2/(1 - x^2(1-nu)^2/4) is no Moebius function: that alone is off by about e (x(1-nu)/2)^2, 3.9
// microstrain at 20 000.
TEST(RationalMap, IsBentWhereTheRatioIsNot) {
  const Circuit c = circuit(CircuitKind::full_bending_poisson);
  const auto m = mapped(c);
  EXPECT_LT(m.worstError.in(units::strain), 1e-9);
  RationalMap straight = m.map;
  straight.bend = {};
  const double alone = 1e6 * (straight.strainAt(ratioAt(c, 0.02)) - 0.02);
  EXPECT_GT(std::abs(alone), 0.3);
  EXPECT_LT(std::abs(alone), 3.93);
}

TEST(RationalMap, OfUnequalGaugesAndLeadsIsRightTo1e9) {
  for (CircuitKind kind : kGaugeCircuits) {
    Circuit c = circuit(kind, 120, 4);
    const double resistances[] = {120, 349, 121.5, 118};
    const double factors[] = {2.0, 2.2, 1.05, 0.9};
    for (std::size_t i = 0; i < 4; ++i) {
      c.arms[i].resistance = resistances[i] * ohm;
      c.arms[i].relativePerStrain *= factors[i];
    }
    c.lead(Terminal::exc_minus) = 25.0 * ohm;
    c.lead(Terminal::exc_plus) = 0.0 * ohm;
    c.inputResistance = 1e5 * ohm;
    for (double centre : {0.0, 3000.0}) {
      EXPECT_LT(mapped(c, centre).worstError.in(units::strain), 1e-9) << description::name(kind) << centre;
    }
  }
}

TEST(RationalMap, KeepsItsBendThroughAmplifierAndZero) {
  const Circuit c = circuit(CircuitKind::full_bending_poisson);
  const double reading0 = 0.93 * ratioAt(c, 0.006) + 4e-4;
  const auto m = mapped(c, 2000).map.afterAmplifier(0.93, 4e-4).zeroedAt(reading0);
  EXPECT_EQ(m.strainAt(reading0), 0);
  for (double e : {-0.018, -0.001, 0.0, 0.01, 0.021}) {
    EXPECT_NEAR(m.strainAt(0.93 * ratioAt(c, e) + 4e-4), e - 0.006, 1e-9) << e;
  }
}

TEST(RationalMap, GoesThroughAnUnbalancedStateAsWell) {
  Circuit c = circuit(CircuitKind::quarter_3_wire, 350, 5);
  c.arms[0].resistance = 352.1 * ohm;
  c.lead(Terminal::comp) = 8.0 * ohm;
  const auto m = mapped(c, 1500);
  EXPECT_LT(m.worstError.in(units::strain), kExact);
  for (double e : {-0.018, 0.0, 0.0015, 0.02}) EXPECT_NEAR(m.map.strainAt(ratioAt(c, e)), e, kExact);
}

TEST(RationalMap, AfterAmplifierUndoesSpanAndOffset) {
  const Circuit c = circuit(CircuitKind::quarter_3_wire, 120, 5);
  const auto m = mapped(c).map.afterAmplifier(0.93, 4e-4);
  for (double e : {-0.01, -0.001, 0.0, 0.002, 0.01}) {
    EXPECT_NEAR(m.strainAt(0.93 * ratioAt(c, e) + 4e-4), e, kExact);
  }
}

TEST(RationalMap, ZeroIsSubtractedInStrain) {
  const Circuit c = circuit(CircuitKind::quarter_3_wire, 120, 5);
  const double r0 = ratioAt(c, 0.004);
  const auto m = mapped(c).map.zeroedAt(r0);
  EXPECT_EQ(m.strainAt(r0), 0);
  for (double e : {-0.01, -0.001, 0.002, 0.01}) EXPECT_NEAR(m.strainAt(ratioAt(c, e)), e - 0.004, kExact);
  // Subtracting the ratio instead would be off by about K e e0 = 0.8 %.
  EXPECT_GT(std::abs(mapped(c).map.strainAt(ratioAt(c, 0.01) - r0) - 0.006), 4e-5);
}

TEST(RationalMap, NeedsACircuitThatFollowsTheStrain) {
  Circuit c = circuit(CircuitKind::quarter_3_wire);
  c.arms[0].relativePerStrain = 0;
  const auto dead = mapOf(c);
  ASSERT_FALSE(dead);
  EXPECT_THAT(dead.error().text(), testing::HasSubstr("does not follow the strain"));
  EXPECT_FALSE(mapOf(circuit(CircuitKind::quarter_3_wire), {}, {}));
  const auto tooFar = mapOf(circuit(CircuitKind::quarter_3_wire), {}, 0.7 * units::strain);
  ASSERT_FALSE(tooFar);
  EXPECT_THAT(tooFar.error().text(), testing::HasSubstr("arm 1"));
}

// Inverse of every closed form, both signs, to rounding.
TEST(StrainOf, InvertsEveryCircuit) {
  for (CircuitKind kind : kGaugeCircuits) {
    for (double lead : {0.0, 5.0, 25.0}) {
      const Circuit c = circuit(kind, 120, lead);
      for (double e : {-0.09, -0.01, -0.001, -1e-6, 0.0, 1e-6, 0.001, 0.01, 0.09}) {
        const auto found = strainOf(c, ratioAt(c, e) * volt_per_volt);
        ASSERT_TRUE(found) << found.error().text();
        EXPECT_NEAR(found->in(units::strain), e, kExact) << description::name(kind) << " lead " << lead;
      }
    }
  }
}

TEST(StrainOf, TakesATransducerToTenTimesItsRatedValue) {
  Circuit c = circuit(CircuitKind::transducer, 350);
  for (auto& arm : c.arms) arm.relativePerStrain *= 1e-3;  // 2 mV/V at rated
  const auto twice = strainOf(c, 4.0 * millivolt_per_volt);
  ASSERT_TRUE(twice);
  EXPECT_NEAR(twice->in(units::strain), 2, 1e-12);
  EXPECT_FALSE(strainOf(c, 21.0 * millivolt_per_volt));
}

TEST(StrainOf, RefusesARatioThatNoStrainGives) {
  const auto none = strainOf(circuit(CircuitKind::quarter_3_wire), 300.0 * millivolt_per_volt);
  ASSERT_FALSE(none);
  EXPECT_EQ(none.error().code, ErrorCode::bad_use);
  EXPECT_THAT(none.error().text(), testing::HasSubstr("300 mV/V"));
  EXPECT_FALSE(strainOf(circuit(CircuitKind::quarter_3_wire), std::nan("") * volt_per_volt));
}

}  // namespace
}  // namespace shuntwright::bridge
