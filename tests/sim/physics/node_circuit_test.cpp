// The simulator's own solver against closed forms (Ohm's law), independently of the driver's.
#include "sim/physics/node_circuit.h"

#include <gtest/gtest.h>

#include <cmath>

#include "sim/physics/specimen.h"

namespace shuntwright::sim {
namespace {

/// The three-wire quarter bridge: nodes P, N, D (dummy), B and A (gauge tabs), S (sense), M (half bridge).
enum Node : std::size_t { P, N, D, B, A, S, M };

double threeWire(double gauge, double lead, double shunt = 0, Node from = P, Node to = P) {
  NodeCircuit c;
  c.hold(P, 1);
  c.hold(N, 0);
  c.connect(P, D, 120);
  c.connect(D, B, lead);
  c.connect(B, A, gauge);
  c.connect(A, N, lead);
  c.connect(B, S, lead);
  c.connect(P, M, 120);
  c.connect(M, N, 120);
  if (shunt > 0) c.connect(from, to, shunt);
  const auto v = c.solve();
  return 1e3 * (v[S] - v[M]);
}

// r = x / (4 (1 + p) + 2 x), x = K e, p = R_L / R; printed for 120 ohm, K = 2, +1000 microstrain (computed with 40
// digits).
TEST(NodeCircuit, strainOfAThreeWireQuarterBridge) {
  EXPECT_NEAR(threeWire(120.24, 1), 0.495376486, 5e-10);
  EXPECT_NEAR(threeWire(120.24, 5), 0.479539642, 5e-10);
  EXPECT_NEAR(threeWire(120.24, 25), 0.413450937, 5e-10);
}

// Shunt 59 880 ohm, leads 10 ohm, mV/V (computed with 40 digits, checked with a circuit simulator).
TEST(NodeCircuit, everyShuntPosition) {
  EXPECT_NEAR(threeWire(120, 10, 59880, B, A), -0.461964891, 5e-10);
  EXPECT_NEAR(threeWire(120, 10, 59880, P, D), +0.461964891, 5e-10);
  EXPECT_NEAR(threeWire(120, 10, 59880, S, N), -0.625469102, 5e-10);
  EXPECT_NEAR(threeWire(120, 10, 59880, D, N), -0.538959039, 5e-10);
  EXPECT_NEAR(threeWire(120, 10, 59880, P, M), -0.500500501, 5e-10);
}

// Simply supported beam, load F at mid-span: the largest moment is F L / 4 (bending theory).
TEST(Beam, momentAtMidSpanIsFLOver4) {
  Beam beam;
  const double load_N = 100e3, fibre_m = 0.3;
  const double expected = load_N * 12 / 4 * fibre_m / (beam.modulus_GPa * 1e9 * beam.secondMoment_m4);
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

TEST(LoadProgramme, rampsAndHolds) {
  const Scenario s;
  EXPECT_EQ(loadPart(s, -1), 0);
  EXPECT_NEAR(loadPart(s, 2), 0.1, 1e-12);
  EXPECT_EQ(loadPart(s, 5), 0.2);
  EXPECT_EQ(loadPart(s, 45), 1.0);
  EXPECT_EQ(loadPart(s, 1000), 0);
}

}  // namespace
}  // namespace shuntwright::sim
