#include "driver/bridge/network.h"

#include <gtest/gtest.h>

#include <complex>

namespace shuntwright::bridge {
namespace {

using Net = Network<double, 8>;

TEST(Network, DividesVoltageByOhmsLaw) {
  Net net(3);
  net.add(0, 2, 1 / 300.0);
  net.add(2, 1, 1 / 100.0);
  net.eliminate();
  EXPECT_DOUBLE_EQ(net.voltages(3)[2], 0.25);
}

// Infinite ladder of 1 ohm: input resistance is the golden ratio; three cells are 13/8 by hand.
TEST(Network, SolvesLadder) {
  Net net(5);  // source - 1 - n4 - 1 - n3 - 1 - n2, 1 ohm to ground from each
  net.add(0, 4, 1);
  net.add(4, 3, 1);
  net.add(3, 2, 1);
  for (int n : {2, 3, 4}) net.add(n, 1, 1);
  net.eliminate();
  const auto v = net.voltages(5);
  EXPECT_DOUBLE_EQ(v[4], 5.0 / 13);
  EXPECT_DOUBLE_EQ(v[3], 2.0 / 13);
  EXPECT_DOUBLE_EQ(v[2], 1.0 / 13);
}

TEST(Network, IsRightWhateverTheSpreadOfConductances) {
  for (double wire : {1e-30, 1e-12, 1e-3}) {
    Net net(5);  // a divider of 100 and 300 ohm with three wires in it, 1e15 ohm beside them
    net.add(0, 4, 1 / 100.0);
    net.add(4, 3, 1 / wire);
    net.add(3, 2, 1 / wire);
    net.add(2, 1, 1 / 300.0);
    net.add(4, 1, 1e-15);
    net.eliminate();
    const double lower = 1 / (1 / (300 + 2 * wire) + 1e-15);
    EXPECT_NEAR(net.voltages(5)[4], lower / (100 + lower), 2e-16) << wire;
    EXPECT_NEAR(net.voltages(5)[2], lower / (100 + lower) * 300 / (300 + 2 * wire), 2e-16) << wire;
  }
}

TEST(Network, BranchBetweenOnePointAndItselfIsNothing) {
  Net net(3);
  net.add(0, 2, 1);
  net.add(2, 1, 1);
  net.add(2, 2, 1e30);
  net.eliminate();
  EXPECT_EQ(net.voltages(3)[2], 0.5);
}

// Reciprocity: what a current into a does at b, the same current into b does at a.
TEST(Network, IsReciprocal) {
  Net net(6);
  int count = 0;
  for (int a = 0; a < 6; ++a) {
    for (int b = 0; b < a; ++b) net.add(a, b, 1.0 / (10 + 7 * ++count));
  }
  net.eliminate();
  for (int a = 2; a < 6; ++a) {
    for (int b = 2; b < a; ++b) {
      Net::Nodes intoA{}, intoB{};
      intoA[static_cast<std::size_t>(a)] = 1;
      intoB[static_cast<std::size_t>(b)] = 1;
      const double atB = net.response(intoA)[static_cast<std::size_t>(b)];
      const double atA = net.response(intoB)[static_cast<std::size_t>(a)];
      EXPECT_GT(atB, 0);
      EXPECT_NEAR(atB, atA, 1e-14 * atA);
    }
  }
}

// v = 300/(100 + 300 + R): dv/dR = -300/400^2 at R = 0, where no conductance exists to take a difference of.
TEST(Network, GivesDerivativeByTheComplexStepAtZeroOhm) {
  const double h = 1e-20;
  Network<std::complex<double>, 4> net(4);
  net.add(0, 3, 1 / 100.0);
  net.add(3, 2, 1.0 / std::complex<double>(0, h));
  net.add(2, 1, 1 / 300.0);
  net.eliminate();
  EXPECT_NEAR(net.voltages(4)[2].imag() / h, -300.0 / (400.0 * 400.0), 1e-17);
}

}  // namespace
}  // namespace shuntwright::bridge
