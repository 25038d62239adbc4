#pragma once

#include <span>

#include "driver/bridge/circuit.h"

namespace shuntwright::bridge {

/// One state of a circuit and how it changes, to first order, all exact (no differences taken).
struct State {
  double ratio_V_per_V = 0;
  double slope = 0;        ///< d ratio / d strain
  double ratioPerOhm = 0;  ///< d ratio / d lead, all leads of the circuit growing together
  double slopePerOhm = 0;  ///< d slope / d lead
};

/// Ratio and slope only; the per-ohm figures stay 0. Errors: as ratio().
Result<State> stateOf(const Circuit& circuit, double strain, std::span<const ShuntPath> shunts = {});

/// All four figures. Errors: as ratio().
Result<State> stateWithLeadDerivatives(const Circuit& circuit, double strain,
                                       std::span<const ShuntPath> shunts = {});

/// Half-width of the strains over which an inverse is looked for: 100 000 microstrain, or ten times the rated
/// value of a transducer; less where an arm would lose nine tenths of its resistance.
double searchRange(const Circuit& circuit);

}  // namespace shuntwright::bridge
