#pragma once

#include <vector>

#include "driver/calibration/channel_model.h"
#include "driver/calibration/record.h"

namespace shuntwright::calibration {

/// What the readings themselves say about their scatter.
struct ReadingScatter {
  double stepRelative = 0;           ///< standard uncertainty of the span from noise and repeats, relative
  double stepDegrees = 1;            ///< its degrees of freedom
  units::Ratio resolution;           ///< of one reading
  units::Ratio smallestStep;         ///< |measured|, to turn the resolution into a relative figure
};

/// Uncertainty of the correction's scale: of measured steps, of the circuit, of the shunts. Sensitivities are
/// central differences of the full network at one standard uncertainty: ln(scale) where scale = 1 / (slope x
/// span) (GUM 5.1.3 note 2). Effective degrees of freedom by Welch-Satterthwaite (GUM G.4.1); the expanded
/// uncertainty at 95.45 % from the convolved shapes, times Student's factor over the normal one.
/// @param zero      true ratio at no load (reading over span).
/// @param measured  steps as measured, one a shunt; their size does not matter, only their proportion.
Result<Budget> scaleBudget(const description::Rack& rack, const description::Channel& channel, units::Ratio zero,
                           const std::vector<units::Ratio>& measured, const ReadingScatter& scatter);

/// How far the zero may move until the test, as a strain: scatter and resolution of the zero reading, the
/// drift seen while calibrating, leads that warm (second order where equal leads cancel).
struct ZeroScatter {
  units::Ratio standardUncertainty;  ///< of the mean zero reading
  units::Ratio resolution;
  units::Ratio returnSpread;         ///< largest |return - before| seen
  units::Ratio stability;            ///< half-width by which the offset may wander until the test
  double leadsShare = 1;             ///< how much of the leads' stated change of temperature happens until then
};
Result<units::Strain> zeroUncertainty(const description::Rack& rack, const description::Channel& channel,
                                      units::Ratio zero, const ZeroScatter& scatter);

}  // namespace shuntwright::calibration
