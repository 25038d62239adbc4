#include "driver/bridge/topology.h"

#include <gtest/gtest.h>

#include <algorithm>

#include "driver/bridge/circuit.h"
#include "tests/driver/bridge/circuits.h"

namespace shuntwright::bridge {
namespace {

using namespace test;

constexpr Terminal kAll[] = {Terminal::exc_plus,   Terminal::exc_minus, Terminal::sig_plus,
                             Terminal::sig_minus,  Terminal::comp,      Terminal::sense_plus,
                             Terminal::sense_minus};

// The description says which leads and terminals a circuit has; the network must have the same.
TEST(Topology, HasTheLeadsAndTerminalsOfTheDescription) {
  for (int k = 0; k <= static_cast<int>(CircuitKind::transducer); ++k) {
    const auto kind = static_cast<CircuitKind>(k);
    for (bool sensed : {false, true}) {
      const Topology* topology = topologyOf(kind, sensed);
      ASSERT_EQ(topology != nullptr, !sensed || description::isFull(kind)) << description::name(kind);
      if (!topology) continue;
      const auto leads = description::leadsOf(kind, sensed);
      const auto terminals = description::terminalsOf(kind, sensed, Side::instrument);
      for (Terminal t : kAll) {
        const auto listed = [&](const auto& list) { return std::ranges::find(list, t) != list.end(); };
        EXPECT_EQ(topology->hasLead(t), listed(leads)) << description::name(kind) << description::name(t);
        EXPECT_EQ(topology->node(t, Side::instrument) != Topology::kNone, listed(terminals))
            << description::name(kind) << description::name(t);
      }
    }
  }
}

TEST(Topology, KnowsWhichTerminalsAreOnePoint) {
  for (CircuitKind kind : {CircuitKind::quarter_3_wire, CircuitKind::full_bending, CircuitKind::transducer}) {
    Circuit c = circuit(kind);
    c.sensed = description::isFull(kind);
    for (Side side : {Side::instrument, Side::gauge}) {
      const auto there = description::terminalsOf(kind, c.sensed, side);
      for (Terminal a : there) {
        for (Terminal b : there) {
          EXPECT_EQ(exists(c, path(a, b, side, 1e5)), !description::onePoint(a, b, side))
              << description::name(a) << description::name(b);
        }
      }
    }
  }
}

TEST(Topology, GaugesAreTheArmsThatFollowTheStrain) {
  for (CircuitKind kind : kGaugeCircuits) {
    const auto weights = description::armWeights(kind, 0.3);
    for (std::size_t i = 0; i < 4; ++i) EXPECT_EQ(topologyOf(kind, false)->isGauge[i], weights[i] != 0);
  }
}

}  // namespace
}  // namespace shuntwright::bridge
