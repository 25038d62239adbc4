#pragma once

#include <optional>
#include <string>
#include <vector>

#include "driver/calibration/lead_fit.h"
#include "driver/calibration/record.h"

namespace shuntwright::calibration {

/// Turns the fit into an interval, a verdict and an advice. The advice tries each input known to 0.01 % (a
/// lead against the others to 0.2 %), and each resistor switched to each other pair of terminals at the
/// instrument.
LeadIdentification identified(const LeadFit& fit);

}  // namespace shuntwright::calibration
