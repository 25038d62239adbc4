#pragma once

#include <functional>
#include <string>
#include <vector>

#include "driver/calibration/analysis.h"
#include "driver/calibration/record.h"
#include "driver/core/random.h"
#include "driver/core/task.h"
#include "driver/rack/live_rack.h"

namespace shuntwright::calibration {

/// Told after each window. Kept by nobody: copy what is wanted.
struct Progress {
  int windowsDone = 0;
  int windowsPlanned = 0;
  std::string channel;
  std::string shunt;     ///< empty: the zero reading
  bool closed = false;   ///< the shunt's relay, in this window
  units::Ratio reading;
};

struct Options {
  Options() {}
  std::vector<std::string> onlyChannels;  ///< empty: all of the rack
  std::function<void(const Progress&)> progress;
};

/// The shunt sequence. Amplifiers are calibrated at the same time, the channels of one after the other; for
/// each shunt: open, closed, open, ... with settling detected against the channel's own noise before every
/// window. Afterwards every relay is open, whatever happened; one that would not open is named in the record.
///
/// @param random gives the record's id its last four digits.
/// Errors: not_found for a channel that the rack does not have; the devices' and the guard's. A relay that
/// does not do as told is a finding of its channel, not an error.
Task<Result<Record>> calibrate(rack::LiveRack& live, rack::LoadPathPermit permit, Random& random, Options options);

}  // namespace shuntwright::calibration
