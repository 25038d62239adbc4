#pragma once

#include <span>
#include <vector>

#include "driver/calibration/channel_model.h"
#include "driver/calibration/record.h"
#include "driver/metrology/monte_carlo.h"

namespace shuntwright::calibration {

/// What the readings themselves say about their scatter.
struct ReadingScatter {
  double stepRelative = 0;    ///< standard uncertainty of the span from noise and repeats, relative
  double stepDegrees = 1;     ///< its degrees of freedom
  units::Ratio resolution;    ///< of one reading
  units::Ratio smallestStep;  ///< |measured|, to turn the resolution into a relative figure
};

/// What the uncertainty of a correction's scale depends on.
struct ScaleReadings {
  units::Ratio zero;  ///< true ratio at no load (reading over span)
  std::vector<units::Ratio>
      measured;                 ///< steps, one a shunt; their size does not matter, only their proportion
  std::vector<double> weights;  ///< of the shunts in the span (spanOf); empty: all alike
  ReadingScatter scatter;
};

/// The measurement behind a correction's scale: of measured steps, of the circuit, of the shunts. Its one
/// output is by how much ln(scale) is off its nominal value, in percent, where scale = 1 / (slope x span) of
/// the full network. Both the budget and its second opinion propagate this model.
Result<metrology::Model> scaleModel(const description::Rack& rack, const description::Channel& channel,
                                    const ScaleReadings& readings);

/// The scales of several channels as one measurement, an output a channel in the order given: shunt resistors
/// and relay contacts that they share correlate them (covariance of firstOrder() or monteCarlo()).
struct ChannelScale {
  const description::Channel* channel = nullptr;
  ScaleReadings readings;
};
Result<metrology::Model> jointScaleModel(const description::Rack& rack,
                                         std::span<const ChannelScale> channels);

/// The budget of the scale: GUM to first order; the expanded uncertainty at 95.45 % from the convolved
/// shapes, times Student's factor over the normal one.
Result<Budget> scaleBudget(const description::Rack& rack, const description::Channel& channel,
                           const ScaleReadings& readings);

/// The same of any model, for one of its outputs in percent.
Result<Budget> budgetOf(const metrology::Model& model, std::size_t output);

/// Second opinion: Monte Carlo of the same model (JCGM 101). Output 0 is in percent of the scale, about 0.
Result<metrology::MonteCarloResult> scaleMonteCarlo(const description::Rack& rack,
                                                    const description::Channel& channel,
                                                    const ScaleReadings& readings, Random& random,
                                                    const metrology::MonteCarloOptions& options = {});

/// How far the zero may move until the test, as a strain: scatter and resolution of the zero reading, the
/// drift seen while calibrating, leads that warm (second order where equal leads cancel).
struct ZeroScatter {
  units::Ratio standardUncertainty;  ///< of the mean zero reading
  units::Ratio resolution;
  units::Ratio returnSpread;  ///< largest |return - before| seen, less what noise explains
  units::Ratio stability;     ///< half-width by which the offset may wander until the test
  double leadsShare = 1;      ///< how much of the leads' stated change of temperature happens until then
};

/// The measurement behind a zero: its one output is by how much the zero is off when the test comes, in m/m.
Result<metrology::Model> zeroModel(const description::Rack& rack, const description::Channel& channel,
                                   units::Ratio zero, const ZeroScatter& scatter);

/// Uncertainty of the zero by the GUM, with second-order terms.
struct ZeroUncertainty {
  units::Strain standard;
  double secondOrderVariance = 0;  ///< what leads that differ and warm add to it, (m/m)^2
};
Result<ZeroUncertainty> zeroUncertainty(const description::Rack& rack, const description::Channel& channel,
                                      units::Ratio zero, const ZeroScatter& scatter);

}  // namespace shuntwright::calibration
