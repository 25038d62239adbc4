#pragma once

#include <string>

#include "driver/calibration/record.h"
#include "driver/core/error.h"
#include "driver/description/rack.h"
#include "driver/rack/live_rack.h"

namespace shuntwright::calibration {

/// Everything in the rack that a channel's correction and its uncertainty follow from, each with its name in
/// words: "gauge factor of arm 1" -> "2.1 within 1 %". What is named by the user (gauges, resistors), where
/// it is plugged in and how the file is written is no part of it.
Basis basisOf(const description::Rack& rack, const description::Channel& channel);

/// Whether the record speaks of this channel as it is described now. Errors: not_found when the record lacks
/// it; refused when it is another rack's or the channel has been changed since, with what differs.
Result<void> stillHolds(const Record& record, const description::Rack& rack,
                        const description::Channel& channel);

/// The same for every channel of the rack; the first that differs is told, and how many more there are.
Result<void> stillHolds(const Record& record, const description::Rack& rack);

/// Whether the devices that answer are those that were calibrated. Errors: refused, with both serial numbers.
Result<void> sameDevices(const Record& record, const rack::LiveRack& live);

}  // namespace shuntwright::calibration
