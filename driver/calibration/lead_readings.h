#pragma once

#include <vector>

#include "driver/calibration/lead_fit.h"
#include "driver/calibration/lead_identification.h"

namespace shuntwright::calibration {

/// A channel's steps made ready for LeadFit: the circuit with its leads as the rack guesses them, their
/// stated tolerance as what they may differ by from each other, everything else as inputsOf() knows it.
/// @param steps  one a shunt, as read; NaN: not measured.
/// @param noise  standard uncertainty of each, resolution included; above 0.
/// @param zero   reading at no load; the amplifier's own offset (profile) counts against it, beside
/// zeroNoise.
LeadReadings leadReadingsOf(const description::Rack& rack, const description::Channel& channel,
                            const std::vector<units::Ratio>& steps, const std::vector<units::Ratio>& noise,
                            units::Ratio zero, units::Ratio zeroNoise);

/// What the shunts will tell of the leads, before any hardware is touched: steps as predicted, noise of the
/// resolution alone. Errors: those of LeadFit::of().
Result<LeadFit> leadFitToCome(const description::Rack& rack, const description::Channel& channel);

}  // namespace shuntwright::calibration
