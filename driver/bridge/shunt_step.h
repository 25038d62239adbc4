#pragma once

#include "driver/bridge/circuit.h"

namespace shuntwright::bridge {

/// What one shunt is predicted to do, at the state the bridge is in before it closes.
struct ShuntStep {
  units::Ratio before;
  units::Ratio step;        ///< after - before
  units::Strain simulated;  ///< strain that would give the same step from the same state, with its sign
  /// Change of |step| per ohm added to every lead, percent of the step.
  double stepPercentPerOhm = 0;
  /// The same for the response to strain (slope dr/de at the state).
  double strainPercentPerOhm = 0;
  /// The two are equal within 2 % of the strain's (and the strain's is above 1e-5 %/ohm).
  bool carriesLeadLoss = false;
};

/// Errors: those of ratio(); bad_use when no strain in the range of strainOf() gives the step. A shunt
/// that moves nothing has a step of 0, simulates 0 and carries nothing.
Result<ShuntStep> predictStep(const Circuit& circuit, units::Strain standing, const ShuntPath& path);

/// Just the step, for sensitivities: after - before.
Result<units::Ratio> stepOf(const Circuit& circuit, units::Strain standing, const ShuntPath& path);

}  // namespace shuntwright::bridge
