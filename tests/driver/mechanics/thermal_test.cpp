#include "driver/mechanics/thermal.h"

#include <gtest/gtest.h>

#include "driver/mechanics/pair.h"

namespace shuntwright::mechanics {
namespace {

using namespace units;

Temperature at(double celsius) {
  return Temperature::celsius(celsius);
}

/// An invented packet, of the usual shape: near zero at 24 degC, falling on both sides.
description::ThermalOutput packet(double factor = 2.0) {
  return {{-31.8, 2.77, -0.0655, 0.000328, -3.26e-7}, GaugeFactor(factor)};
}

// Term by term (computed).
TEST(ThermalOutput, IsThePolynomialCountedFromTheZeroBalance) {
  const double p24 = -31.8 + 2.77 * 24 - 0.0655 * 576 + 0.000328 * 13824 - 3.26e-7 * 331776;
  const double p60 = -31.8 + 2.77 * 60 - 0.0655 * 3600 + 0.000328 * 216000 - 3.26e-7 * 12960000;
  EXPECT_NEAR(thermalOutput(packet(), GaugeFactor(2.0), at(60), at(24)).in(microstrain), p60 - p24, 1e-9);
  EXPECT_NEAR(thermalOutput(packet(), GaugeFactor(2.0), at(24), at(60)).in(microstrain), p24 - p60, 1e-9);
  EXPECT_EQ(thermalOutput(packet(), GaugeFactor(2.0), at(37), at(37)).in(microstrain), 0);
  EXPECT_EQ(thermalOutput({}, GaugeFactor(2.0), at(60), at(24)).in(microstrain), 0);
}

// The packet's polynomial was read with an instrument at 2.0; a channel at 2.1 shows less of the same dR/R
// (common practice: multiply by the ratio of the factors; it follows from dR/R = K e).
TEST(ThermalOutput, IsRescaledToTheChannelsFactor) {
  const auto sheet = thermalOutput(packet(2.0), GaugeFactor(2.0), at(80), at(20));
  const auto used = thermalOutput(packet(2.0), GaugeFactor(2.1), at(80), at(20));
  EXPECT_NEAR(used / sheet, 2.0 / 2.1, 1e-14);
}

// Slope of an invented packet: +0.9 % per 100 K from 24 degC, so 0.486 % at 78 degC (computed).
TEST(GaugeFactorSlope, IsLinearFromTheSheetsTemperature) {
  ThermalBehaviour b;
  b.factorSlope = 0.009 / 100 * per_kelvin;
  EXPECT_NEAR(factorAt(GaugeFactor(2.08), b, at(78)).value(), 2.08 * 1.00486, 1e-12);
  EXPECT_NEAR(factorAt(GaugeFactor(2.08), b, at(24)).value(), 2.08, 1e-15);
}

// Forward by the definition, dR/R = K(t) e + K_sheet (P(t) - P(zero)), then back.
TEST(ThermalEffects, AreUndone) {
  ThermalBehaviour b{packet(2.0), 0.012 / 100 * per_kelvin};
  for (const double t : {-40.0, 0.0, 24.0, 60.0, 120.0}) {
    for (const double e : {-2000.0, 0.0, 850.0}) {
      const double relative = factorAt(GaugeFactor(2.11), b, at(t)).value() * e * 1e-6 +
                              2.0 * thermalOutput(packet(2.0), GaugeFactor(2.0), at(t), at(18)).in(strain);
      const Strain shown = relative / 2.11 * strain;
      EXPECT_NEAR(withoutThermalEffects(shown, GaugeFactor(2.11), b, at(t), at(18)).in(microstrain), e, 1e-9);
    }
  }
}

TEST(Pair, SplitsIntoAxialAndBending) {
  const auto s = axialAndBending(420 * microstrain, -180 * microstrain);
  EXPECT_NEAR(s.axial.in(microstrain), 120, 1e-12);
  EXPECT_NEAR(s.bending.in(microstrain), 300, 1e-12);
}

// Neutral axis a quarter of the way from the first gauge: e = axial + k y with y = 1 and -3.
TEST(Pair, KnowsSectionsThatAreNotSymmetric) {
  const auto s = axialAndBending((50 + 70) * microstrain, (50 - 3 * 70) * microstrain, 0.25);
  EXPECT_NEAR(s.axial.in(microstrain), 50, 1e-12);
  EXPECT_NEAR(s.bending.in(microstrain), 70, 1e-12);
}

}  // namespace
}  // namespace shuntwright::mechanics
