#pragma once

#include <optional>
#include <span>
#include <vector>

#include "driver/calibration/channel_model.h"
#include "driver/calibration/lead_fit.h"
#include "driver/calibration/record.h"
#include "driver/calibration/step_figures.h"
#include "driver/calibration/strain_model.h"
#include "driver/calibration/window.h"
#include "driver/core/error.h"
#include "driver/description/rack.h"

namespace shuntwright::calibration {

struct ChannelReadings {
  std::vector<ShuntReadings> shunts;  ///< as the channel lists them
  std::optional<Window> zero;         ///< at no load, every relay open
};

/// By how much the variance of a mean exceeds that of independent samples, when an input filter of time
/// constant tau makes neighbours alike: (1 + rho) / (1 - rho), rho = exp(-T / tau).
double correlationFactor(const description::Rack& rack, const description::Channel& channel);

/// The same as the samples themselves show it: rho = 1 - d^2 / (2 s^2) with d the mean square of successive differences
/// (von Neumann's ratio), pooled over the windows; not below 1, and not above `most`, the filter's.
double correlationSeen(std::span<const Window> windows, double most);

/// A sensor that is neither calibrated nor zeroed keeps its absolute scale (a thermometer).
bool isAbsolute(const description::Channel& channel);

/// Sets the correction for a span and a zero reading. Errors: as explain() and bridge::mapOf().
Result<void> correct(const description::Channel& channel, const ChannelModel& model, double span,
                     units::Ratio zero, ChannelResult& result);

/// What a channel's budgets were worked out from, for second opinions.
struct Behind {
  StrainReadings readings;
  std::optional<LeadFit> fit;  ///< where its leads were identified
};

/// Turns a channel's readings into its correction, budget and verdict. Never fails as a whole: what cannot be
/// worked out is a finding and a failed verdict, and the correction is then the nominal one.
ChannelResult analyse(const description::Rack& rack, const description::Channel& channel,
                      const ChannelReadings& readings, Behind* behind = nullptr);

/// Findings and verdict against the rack's limits; called by analyse once the figures are there.
/// @param slope_per_strain  dr/de, to turn ratios into the strain that the limits speak of.
void judge(ChannelResult& result, const ChannelReadings& readings, const description::Limits& limits,
           double slope_per_strain);

}  // namespace shuntwright::calibration
