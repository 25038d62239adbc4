// The simulator's own solver against closed forms (Ohm's law), independently of the driver's.
#include "sim/physics/node_circuit.h"

#include <gtest/gtest.h>

#include <cmath>

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

// Two equal dividers joined by 0 ohm at their middles: one node, exactly; and a loop of 0 ohm does no harm.
TEST(NodeCircuit, zeroOhmMakesOneNode) {
  NodeCircuit c;
  c.connect(D, B, 0);
  c.connect(B, A, 0);
  c.connect(A, D, 0);
  c.hold(P, 1);
  c.hold(N, 0);
  c.connect(P, D, 300);
  c.connect(A, N, 100);
  const auto v = c.solve();
  EXPECT_DOUBLE_EQ(v[D], 0.25);
  EXPECT_EQ(v[B], v[D]);
  EXPECT_EQ(v[A], v[D]);
}

// An unbalanced bridge with a resistor between its middles: Kirchhoff's current law at both.
TEST(NodeCircuit, currentsAtEveryNodeAddUpToNothing) {
  NodeCircuit c;
  c.hold(P, 10);
  c.hold(N, 0);
  c.connect(P, A, 1);
  c.connect(A, N, 2);
  c.connect(P, B, 3);
  c.connect(B, N, 4);
  c.connect(A, B, 5);
  const auto v = c.solve();
  EXPECT_NEAR((10 - v[A]) / 1 - v[A] / 2 - (v[A] - v[B]) / 5, 0, 1e-14);
  EXPECT_NEAR((10 - v[B]) / 3 - v[B] / 4 + (v[A] - v[B]) / 5, 0, 1e-14);
}

}  // namespace
}  // namespace shuntwright::sim
