#pragma once

#include "driver/bridge/circuit.h"

namespace shuntwright::bridge {

/// What one shunt is predicted to do, at the state the bridge is in before it closes.
struct ShuntStep {
  units::Ratio before;
  units::Ratio step;                  ///< after - before
  units::Strain simulated;            ///< strain that would give the same step from the same state, with its sign
  double stepPercentPerOhm = 0;       ///< change of |step| per ohm added to every lead, percent of the step
  double strainPercentPerOhm = 0;     ///< the same for the response to strain (slope dr/de at the state)
  bool carriesLeadLoss = false;       ///< the two are equal within 2 % of the strain's (and the strain's is not 0)
};

/// Errors: those of ratio(); bad_use when no strain in +-100 000 microstrain gives the step.
Result<ShuntStep> predictStep(const Circuit& circuit, units::Strain standing, const ShuntPath& path);

/// Just the step, for sensitivities: after - before.
Result<units::Ratio> stepOf(const Circuit& circuit, units::Strain standing, const ShuntPath& path);

}  // namespace shuntwright::bridge
