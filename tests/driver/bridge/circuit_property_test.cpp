#include <gtest/gtest.h>
#include <rapidcheck/gtest.h>

#include "driver/bridge/rational_map.h"
#include "driver/bridge/shunt_step.h"
#include "driver/bridge/state.h"
#include "tests/driver/bridge/circuits.h"

// What must hold for any bridge, with arms off nominal and leads unequal.
namespace shuntwright::bridge {
namespace {

using namespace test;

double drawn(double low, double high) {
  constexpr int kSteps = 1 << 20;
  return low + (high - low) * *rc::gen::inRange(0, kSteps + 1) / kSteps;
}

/// Leads of 0 to 25 ohm, a quarter of them none at all; arms within 1 %; sensed now and then.
Circuit drawnCircuit() {
  const auto kind =
      *rc::gen::elementOf(std::vector<CircuitKind>(std::begin(kGaugeCircuits), std::end(kGaugeCircuits)));
  Circuit c = circuit(kind, *rc::gen::element(120.0, 350.0, 1000.0));
  for (auto& arm : c.arms) arm.resistance = arm.resistance * drawn(0.99, 1.01);
  for (auto& lead : c.leads) lead = std::max(0.0, drawn(-25.0 / 3, 25)) * ohm;
  c.inputResistance = *rc::gen::element(1e5, 1e7, 1e9, kInfinite) * ohm;
  c.sensed = description::isFull(kind) && *rc::gen::arbitrary<bool>();
  return c;
}

ShuntPath drawnPath(const Circuit& c) {
  for (;;) {
    const Side side = *rc::gen::element(Side::instrument, Side::gauge);
    const auto terminals = description::terminalsOf(c.kind, c.sensed, side);
    const ShuntPath p =
        path(*rc::gen::elementOf(terminals), *rc::gen::elementOf(terminals), side, drawn(2e4, 1e6));
    if (exists(c, p)) return p;
  }
}

RC_GTEST_PROP(CircuitProperties, InverseUndoesTheNetwork, ()) {
  const Circuit c = drawnCircuit();
  const double e = drawn(-0.02, 0.02);
  const auto found = strainOf(c, ratioAt(c, e) * volt_per_volt);
  RC_ASSERT(found.has_value());
  RC_ASSERT(std::abs(found->in(units::strain)-e) < 1e-14);
}

RC_GTEST_PROP(CircuitProperties, MapUndoesTheNetworkForOneActiveGauge, ()) {
  Circuit c = drawnCircuit();
  for (std::size_t i = 1; i < 4; ++i) c.arms[i].relativePerStrain = 0;
  const auto m = mapOf(c, drawn(-0.005, 0.005) * units::strain);
  RC_ASSERT(m.has_value());
  RC_ASSERT(m->worstError.in(units::strain) < 1e-14);
  const double e = drawn(-0.05, 0.05);
  RC_ASSERT(std::abs(m->map.strainAt(ratioAt(c, e)) - e) < 1e-13);
}

RC_GTEST_PROP(CircuitProperties, InfiniteShuntIsNothing, ()) {
  const Circuit c = drawnCircuit();
  ShuntPath p = drawnPath(c);
  p.resistance = kInfinite * ohm;
  const double e = drawn(-0.02, 0.02);
  RC_ASSERT(ratioAt(c, e, {&p, 1}) == ratioAt(c, e));
}

RC_GTEST_PROP(CircuitProperties, WithoutLeadsBothSidesAreOne, ()) {
  Circuit c = drawnCircuit();
  c.leads.fill({});
  ShuntPath p = drawnPath(c);
  p.side = Side::gauge;
  RC_PRE(exists(c, p));
  ShuntPath near = p;
  near.side = Side::instrument;
  const double e = drawn(-0.02, 0.02);
  RC_ASSERT(std::abs(ratioAt(c, e, {&p, 1}) - ratioAt(c, e, {&near, 1})) < 4e-16);
}

RC_GTEST_PROP(CircuitProperties, ShuntHasNoDirection, ()) {
  const Circuit c = drawnCircuit();
  const ShuntPath p = drawnPath(c);
  ShuntPath turned = p;
  std::swap(turned.across.first, turned.across.second);
  RC_ASSERT(ratioAt(c, 1e-3, {&p, 1}) == ratioAt(c, 1e-3, {&turned, 1}));
}

RC_GTEST_PROP(CircuitProperties, OnlyRatiosOfResistancesCount, ()) {
  const Circuit c = drawnCircuit();
  ShuntPath p = drawnPath(c);
  Circuit scaled = c;
  const double k = drawn(0.1, 10);
  for (auto& arm : scaled.arms) arm.resistance = k * arm.resistance;
  for (auto& lead : scaled.leads) lead = k * lead;
  scaled.inputResistance = k * scaled.inputResistance;
  const double r = ratioAt(c, 2e-3, {&p, 1});
  p.resistance = k * p.resistance;
  RC_ASSERT(std::abs(ratioAt(scaled, 2e-3, {&p, 1}) - r) < 1e-15);
}

// Turning the bridge over (EXC+ with EXC-, arms 1 with 2 and 3 with 4) turns the sign: full bridges.
RC_GTEST_PROP(CircuitProperties, TurningTheExcitationTurnsTheSign, ()) {
  Circuit c = drawnCircuit();
  RC_PRE(description::isFull(c.kind));
  Circuit turned = c;
  std::swap(turned.arms[0], turned.arms[1]);
  std::swap(turned.arms[2], turned.arms[3]);
  std::swap(turned.lead(Terminal::exc_plus), turned.lead(Terminal::exc_minus));
  std::swap(turned.lead(Terminal::sense_plus), turned.lead(Terminal::sense_minus));
  RC_ASSERT(std::abs(ratioAt(c, 3e-3) + ratioAt(turned, 3e-3)) < 1e-15);
}

RC_GTEST_PROP(CircuitProperties, SensingHidesTheExcitationLeads, ()) {
  Circuit c = drawnCircuit();
  RC_PRE(c.sensed);
  const double r = ratioAt(c, 3e-3);
  for (Terminal t : {Terminal::exc_plus, Terminal::exc_minus, Terminal::sense_plus, Terminal::sense_minus}) {
    c.lead(t) = drawn(0, 25) * ohm;
  }
  RC_ASSERT(std::abs(ratioAt(c, 3e-3) - r) < 1e-15);
}

// The derivatives of the complex step and of the driven currents against plain differences.
RC_GTEST_PROP(CircuitProperties, DerivativesAreThoseOfTheRatio, ()) {
  Circuit c = drawnCircuit();
  for (auto& lead : c.leads) lead += 0.1 * ohm;
  const ShuntPath p = drawnPath(c);
  const double e = drawn(-0.01, 0.01), he = 1e-5, hr = 0.05;
  const auto state = stateWithLeadDerivatives(c, e, {&p, 1});
  RC_ASSERT(state.has_value());
  const auto moved = [&](double lead) {
    Circuit other = c;
    for (auto& l : other.leads) l += lead * ohm;
    return stateOf(other, e, {&p, 1}).value();
  };
  const double slope = (ratioAt(c, e + he, {&p, 1}) - ratioAt(c, e - he, {&p, 1})) / (2 * he);
  RC_ASSERT(std::abs(state->slope - slope) < 1e-8);
  const State up = moved(hr), down = moved(-hr);
  RC_ASSERT(std::abs(state->ratioPerOhm - (up.ratio_V_per_V - down.ratio_V_per_V) / (2 * hr)) < 1e-8);
  RC_ASSERT(std::abs(state->slopePerOhm - (up.slope - down.slope) / (2 * hr)) < 1e-7);
}

}  // namespace
}  // namespace shuntwright::bridge
