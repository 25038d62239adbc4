#pragma once

#include <functional>
#include <string>
#include <vector>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/core/task.h"
#include "driver/device/sample_block.h"
#include "driver/rack/live_rack.h"

namespace shuntwright::rack {

/// Where samples and trouble go. Called on the one thread; blocks are the callee's to change.
struct AcquisitionSink {
  /// A block of one amplifier; the last may hold no frame but what was lost before the end. Samples taken while a relay may be closed, or was less than its release time
  /// and the filter's settling ago, carry kSwitching.
  std::function<void(const std::string& device, device::SampleBlock& block)> block;
  /// A device has gone silent or away (the others go on), or is back.
  std::function<void(const std::string& device, const Error& error)> fault;
  std::function<void(const std::string& device)> recovered;
};

/// Runs every amplifier of the rack at its rate until `stopWanted` says so (asked at least twice a second) or
/// the coroutine is cancelled. Starting sets rates, which changes readings: hence the permit. A device that fails is reported once and started again every second; the
/// others never wait for it. Errors: only when no amplifier could be started at all.
Task<Result<void>> acquire(LiveRack& live, LoadPathPermit permit, AcquisitionSink sink, std::function<bool()> stopWanted);

}  // namespace shuntwright::rack
