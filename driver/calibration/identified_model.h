#pragma once

#include "driver/calibration/claims.h"
#include "driver/calibration/lead_fit.h"
#include "driver/calibration/record.h"
#include "driver/calibration/strain_model.h"

namespace shuntwright::calibration {

/// The measurement behind the claims of a channel whose leads were identified: its inputs are what the fit
/// rests on (noise of steps and zero, resistors, gauges, leads against each other), the leads' warming until
/// the test, and what adds to zero and reading. Leads and span move together as the fit's covariance says.
/// Outputs: those of Claims, and last the
/// mean of the leads that carry current, in ohm off what was found.
/// @param readings  its steps are not used: they are in the fit.
Result<metrology::Model> identifiedModel(const LeadFit& fit, const description::Rack& rack,
                                         const description::Channel& channel, const StrainReadings& readings,
                                         std::span<const units::Strain> levels);

}  // namespace shuntwright::calibration
