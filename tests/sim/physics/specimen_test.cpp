// The specimen against bending theory and the transformation of plane strain.
#include "sim/physics/specimen.h"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

namespace shuntwright::sim {
namespace {

// Simply supported beam, load F at mid-span: the largest moment is F L / 4 (bending theory).
TEST(Beam, momentAtMidSpanIsFLOver4) {
  Beam beam;
  const double load_N = 100e3, fibre_m = 0.3;
  const double expected = load_N * 12 / 4 * fibre_m / (beam.modulus.in(units::pascal)*beam.secondMoment_m4);
  GaugePlace place{6.0 * units::metre, fibre_m * units::metre, 0};
  EXPECT_NEAR(beamStrain(beam, place, load_N * units::newton), expected, 1e-15);
  place.angle_deg = 90;
  EXPECT_NEAR(beamStrain(beam, place, load_N * units::newton), -0.3 * expected, 1e-15);
  place = {0.0 * units::metre, fibre_m * units::metre, 0};
  EXPECT_EQ(beamStrain(beam, place, load_N * units::newton), 0);
}

// Strain transformation of a uniaxial field: e45 = (e0 + e90) / 2 for principal axes along and across.
TEST(Beam, rosetteOnThePrincipalAxes) {
  const Beam beam;
  const auto at = [&](double angle) {
    return beamStrain(beam, {3.0 * units::metre, 0.25 * units::metre, angle}, 50.0 * units::kilonewton);
  };
  EXPECT_NEAR(at(45), (at(0) + at(90)) / 2, 1e-18);
}

// Mean shear over the web, V = F/2 on the left half and -F/2 on the right: at the neutral axis a gauge at 45
// degrees sees half the shear strain, one at -45 the opposite (Mohr's circle of pure shear), along and across
// see none.
TEST(Beam, shearInTheWeb) {
  const Beam beam;
  const auto at = [&](double along_m, double angle) {
    GaugePlace place{along_m * units::metre, 0.0 * units::metre, angle};
    place.web = true;
    return beamStrain(beam, place, 100.0 * units::kilonewton);
  };
  const double shearModulus_Pa = 210e9 / 2.6;
  const double gamma = 50e3 / (shearModulus_Pa * 6800e-6);
  EXPECT_NEAR(at(2, 45), gamma / 2, 1e-15);
  EXPECT_NEAR(at(2, -45), -gamma / 2, 1e-15);
  EXPECT_NEAR(at(10, 45), -gamma / 2, 1e-15);
  EXPECT_NEAR(at(2, 0), 0, 1e-18);
  EXPECT_NEAR(at(2, 90), 0, 1e-18);
}

// e0 + e90 does not change when the axes turn (first invariant).
TEST(Beam, sumOfTwoPerpendicularStrainsStays) {
  const Beam beam;
  const auto at = [&](double angle) {
    GaugePlace place{3.0 * units::metre, 0.2 * units::metre, angle};
    place.web = true;
    return beamStrain(beam, place, 100.0 * units::kilonewton);
  };
  for (const double turned : {10.0, 30.0, 45.0, 77.0})
    EXPECT_NEAR(at(turned) + at(turned + 90), at(0) + at(90), 1e-17);
}

TEST(LoadProgramme, rampsAndHolds) {
  const Scenario s;
  EXPECT_EQ(loadPart(s, -1), 0);
  EXPECT_NEAR(loadPart(s, 2), 0.1, 1e-12);
  EXPECT_EQ(loadPart(s, 5), 0.2);
  EXPECT_EQ(loadPart(s, 45), 1.0);
  EXPECT_EQ(loadPart(s, 1000), 0);
}

TEST(Specimen, transducersSeeTheLoadAndTheHall) {
  description::Rack rack;
  description::Channel cell, thermometer, follower;
  cell.name = "F1";
  cell.transducer.emplace();
  cell.transducer->ratedValue = 200;
  cell.transducer->unit = "kN";
  thermometer.name = "T1";
  thermometer.transducer.emplace();
  thermometer.transducer->ratedValue = 100;
  thermometer.transducer->unit = "degC";
  follower.name = "B1";
  follower.expected = 300.0 * units::microstrain;
  rack.channels = {cell, thermometer, follower};
  const Specimen specimen(rack, Scenario(), Random(3));
  EXPECT_EQ(specimen.strainOf(cell, -1, 100), 0);
  EXPECT_NEAR(specimen.strainOf(cell, 45, 100), 180.0 / 200, 1e-12);
  const double cold = specimen.strainOf(thermometer, -1, 0), warm = specimen.strainOf(thermometer, -1, 1800);
  EXPECT_NEAR(cold, 0.21, 1e-12);
  EXPECT_GT(warm, cold);
  EXPECT_LT(warm - cold, 0.02) << "slowly, by no more than 2 K";
  const double full = specimen.strainOf(follower, 45, 100);
  EXPECT_GE(full, 0.8 * 300e-6);
  EXPECT_LE(full, 300e-6);
  EXPECT_NEAR(specimen.strainOf(follower, 5, 100), 0.2 * full, 1e-15);
}

}  // namespace
}  // namespace shuntwright::sim
