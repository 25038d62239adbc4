#pragma once

#include <optional>
#include <vector>

#include "driver/calibration/record.h"
#include "driver/calibration/window.h"
#include "driver/core/error.h"
#include "driver/description/rack.h"

namespace shuntwright::calibration {

/// All readings of one shunt: open, closed, open, closed, ... open. Shape: opened has one window more than
/// closed, unless the relay would not work.
struct ShuntReadings {
  std::vector<Window> opened;
  std::vector<Window> closed;
  Nanoseconds settling{0};
  bool steady = true;
  std::optional<Error> relayError;
};

/// Steps with linear drift removed: each closed window against the straight line through the open ones beside
/// it, at its own time (A-B-A). Settling makes the waits unequal; the plain mean of the two would leave part
/// of the drift.
std::vector<units::Ratio> stepsOf(const ShuntReadings& readings);

/// Figures of one shunt, and the standard uncertainty of its mean step.
struct StepFigures {
  ShuntResult result;  ///< as far as the readings alone tell
  double u_V_per_V = 0;
  double degrees = 1;
};

/// @param correlation  by how much samples that a filter makes alike scatter a mean more (correlationSeen).
StepFigures figuresOf(const description::Shunt& shunt, const ShuntReadings& readings, double correlation);

}  // namespace shuntwright::calibration
