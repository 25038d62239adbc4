#pragma once

#include <optional>
#include <vector>

#include "driver/calibration/channel_model.h"
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

struct ChannelReadings {
  std::vector<ShuntReadings> shunts;  ///< as the channel lists them
  std::optional<Window> zero;         ///< at no load, every relay open
};

/// Steps with linear drift removed: each closed window against the straight line through the open ones beside it, at
/// its own time (A-B-A). Settling makes the waits unequal; the plain mean of the two would leave part of the drift.
std::vector<units::Ratio> stepsOf(const ShuntReadings& readings);

/// By how much the variance of a mean exceeds that of independent samples, when an input filter of time
/// constant tau makes neighbours alike: (1 + rho) / (1 - rho), rho = exp(-T / tau).
double correlationFactor(const description::Rack& rack, const description::Channel& channel);

/// A sensor that is neither calibrated nor zeroed keeps its absolute scale (a thermometer).
bool isAbsolute(const description::Channel& channel);

/// Sets the correction for a span and a zero reading. Errors: as explain() and bridge::mapOf().
Result<void> correct(const description::Channel& channel, const ChannelModel& model, double span, units::Ratio zero,
                     ChannelResult& result);

/// Turns a channel's readings into its correction, budget and verdict. Never fails as a whole: what cannot be
/// worked out is a finding and a failed verdict, and the correction is then the nominal one.
ChannelResult analyse(const description::Rack& rack, const description::Channel& channel,
                      const ChannelReadings& readings);

/// Findings and verdict against the rack's limits; called by analyse once the figures are there.
/// @param slope_per_strain  dr/de, to turn ratios into the strain that the limits speak of.
void judge(ChannelResult& result, const ChannelReadings& readings, const description::Limits& limits,
           double slope_per_strain);

}  // namespace shuntwright::calibration
