#pragma once

#include <cmath>
#include <limits>
#include <string>

#include "driver/bridge/circuit.h"

/// Circuits for the tests of driver/bridge, in one line each.
namespace shuntwright::bridge::test {

using description::CircuitKind;
using description::Side;
using description::Terminal;
using units::microstrain;
using units::millivolt_per_volt;
using units::ohm;
using units::volt_per_volt;

inline constexpr double kInfinite = std::numeric_limits<double>::infinity();

inline constexpr CircuitKind kGaugeCircuits[] = {
    CircuitKind::quarter_2_wire, CircuitKind::quarter_3_wire,       CircuitKind::half_bending,
    CircuitKind::half_poisson,   CircuitKind::half_opposite,        CircuitKind::full_bending,
    CircuitKind::full_poisson,   CircuitKind::full_bending_poisson, CircuitKind::full_shear};

/// Four arms of R ohm, every lead the same, gauge factor 2, an input that draws nothing.
inline Circuit circuit(CircuitKind kind, double arm_ohm = 120, double lead_ohm = 0, double poisson = 0.3) {
  Circuit c;
  c.kind = kind;
  const auto weights = description::armWeights(kind, poisson);
  for (std::size_t i = 0; i < 4; ++i) c.arms[i] = {arm_ohm * ohm, 2.0 * weights[i]};
  c.leads.fill(lead_ohm * ohm);
  c.inputResistance = kInfinite * ohm;
  return c;
}

/// mV/V at a strain in microstrain; NaN (which no comparison takes) when there is an error.
inline double millivolts(const Circuit& c, double strain_microstrain,
                         std::span<const ShuntPath> shunts = {}) {
  const auto r = ratio(c, strain_microstrain * microstrain, shunts);
  return r ? r->in(millivolt_per_volt) : std::nan("");
}

inline double ratioAt(const Circuit& c, double strain, std::span<const ShuntPath> shunts = {}) {
  return millivolts(c, strain * 1e6, shunts) / 1e3;
}

inline ShuntPath path(Terminal a, Terminal b, Side side, double r_ohm) {
  return {{a, b}, side, r_ohm * ohm};
}

// The shunt positions of a three-wire quarter bridge.
inline ShuntPath acrossTabs(double r) {
  return path(Terminal::sig_plus, Terminal::exc_minus, Side::gauge, r);
}
inline ShuntPath acrossCompletion(double r) {
  return path(Terminal::exc_plus, Terminal::comp, Side::instrument, r);
}
inline ShuntPath throughSenseLead(double r) {
  return path(Terminal::sig_plus, Terminal::exc_minus, Side::instrument, r);
}
inline ShuntPath fromCompletionTerminal(double r) {
  return path(Terminal::comp, Terminal::exc_minus, Side::instrument, r);
}
inline ShuntPath acrossUpperHalfBridge(double r) {
  return path(Terminal::exc_plus, Terminal::sig_minus, Side::instrument, r);
}
inline ShuntPath acrossLowerHalfBridge(double r) {
  return path(Terminal::sig_minus, Terminal::exc_minus, Side::instrument, r);
}

}  // namespace shuntwright::bridge::test
