#pragma once

#include <map>
#include <string>
#include <vector>

#include "driver/calibration/record.h"
#include "driver/calibration/window.h"
#include "driver/core/task.h"
#include "driver/rack/live_rack.h"

namespace shuntwright::calibration {

/// Zero readings by channel, all taken at the same time.
using Zeros = std::map<std::string, Window>;

/// Reads every channel of the rack for `span`. The specimen must carry no load, which nobody but the person
/// who asks can know. No relay is touched; samples that a relay may still have touched are left out. Errors:
/// the devices'; refused while a relay may be closed.
Task<Result<Zeros>> takeZeros(rack::LiveRack& live, rack::LoadPathPermit permit, Nanoseconds span);

/// Puts these zeros in place of those of the calibration: the corrections are worked out again about them
/// (spans stay), and so is how far each zero may move in the time that it has to hold. Absolute sensors keep
/// their correction.
///
/// Leads are taken to change their temperature by no more than the rack's temperature_tolerance in an hour,
/// and in proportion in less (common practice, no source); the amplifier's zero_stability is counted in full.
/// Returns what a person should know: "zero-not-taken" (the old one stays), "zero-moved" by more than the
/// rack's limit of zero return since the calibration, "zero-unsteady" while it was read.
std::vector<Finding> rezero(Record& record, const description::Rack& rack, const Zeros& zeros, Instant when,
                            Nanoseconds holds);

}  // namespace shuntwright::calibration
