#pragma once

#include <vector>

#include "driver/calibration/channel_model.h"
#include "driver/metrology/least_squares.h"
#include "driver/metrology/matrix.h"

namespace shuntwright::calibration {

/// Steps of a channel's shunts as predicted, and how well: resistors, contacts, gauge and leads by the law of
/// propagation of uncertainty (GUM H.2.3), so that shunts of one resistor or one gauge are no independent
/// witnesses.
struct PredictedSteps {
  std::vector<units::Ratio> steps;
  metrology::Matrix covariance;  ///< (V/V)^2
};

/// The leads are as the rack states them, even where their loss goes into the span.
/// @param zero  true ratio at no load. Errors: those of predictScale().
Result<PredictedSteps> predictedSteps(const description::Rack& rack, const description::Channel& channel,
                                      units::Ratio zero);

/// Standard uncertainty of a step by the resolution of its two readings (each off by at most half a digit: a
/// triangle), and never quite 0.
units::Ratio resolutionOfStep(units::Ratio digit);

/// Weight of each shunt in the span (see spanOf): one over the variance of its step, of reading and
/// prediction together. What the shunts share is left out of the weights, but not out of any uncertainty.
/// @param noise  standard uncertainty of each step as read.
std::vector<double> stepWeights(const PredictedSteps& predicted, const std::vector<units::Ratio>& noise);

/// How straight the chain from bridge to reading is, as the shunts of a channel show it.
struct Linearity {
  double span = 1;                 ///< measured over predicted, weighted least squares through the origin
  double standardUncertainty = 0;  ///< of the span: noise, and everything uncertain about the predicted steps
  std::vector<units::Ratio> residuals;  ///< measured - span x predicted, one a shunt; NaN: not measured
  double worst_percent = 0;             ///< largest |residual|, in percent of the largest step
  double worstExpanded_percent = 0;     ///< its expanded uncertainty at 95.45 %
  metrology::LackOfFit
      lackOfFit;  ///< chi-square of the generalised least squares line, all covariances counted
};

/// Resistors that are off by their tolerance are not taken for a bent chain. With one shunt the line always
/// fits.
/// @param measured  step of each shunt, as the channel lists them; NaN: not measured.
/// @param noise     its standard uncertainty from noise, repeats and resolution; above 0.
/// Errors: bad_use when no step was measured, for other numbers of steps than shunts, a noise that is not
/// above 0.
Result<Linearity> linearityOf(const PredictedSteps& predicted, const std::vector<units::Ratio>& measured,
                              const std::vector<units::Ratio>& noise);

}  // namespace shuntwright::calibration
