#pragma once

#include <vector>

#include "driver/calibration/channel_model.h"
#include "driver/metrology/least_squares.h"

namespace shuntwright::calibration {

/// How straight the chain from bridge to reading is, as several shunts show it.
struct Linearity {
  double span = 1;  ///< measured over predicted, by generalised least squares through the origin
  double standardUncertainty = 0;  ///< of the span: noise, and everything uncertain about the predicted steps
  std::vector<units::Ratio> residuals;  ///< measured - span x predicted, one a shunt
  double worst_percent = 0;             ///< largest |residual|, in percent of the largest step
  metrology::LackOfFit lackOfFit;       ///< chi-square against all the uncertainties stated
};

/// Straight line through the origin of measured against predicted steps. The observations' covariance is that
/// of the noise plus that of the predicted steps (resistors, contacts, gauge, leads by the law of propagation
/// of uncertainty, GUM H.2.3), so that shunts of one resistor or one gauge do not count as independent
/// witnesses, and resistors off by their tolerance are not taken for a bent chain. With one shunt the line
/// always fits.
/// @param zero      true ratio at no load.
/// @param measured  step of each shunt, as the channel lists them.
/// @param noise     its standard uncertainty from noise, repeats and resolution; above 0.
/// Errors: bad_use for no shunts, other numbers of steps than shunts, a noise that is not above 0; those of
/// predictScale().
Result<Linearity> linearityOf(const description::Rack& rack, const description::Channel& channel,
                              units::Ratio zero, const std::vector<units::Ratio>& measured,
                              const std::vector<units::Ratio>& noise);

}  // namespace shuntwright::calibration
