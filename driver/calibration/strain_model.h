#pragma once

#include <span>
#include <vector>

#include "driver/calibration/uncertainty.h"

namespace shuntwright::calibration {

/// What the uncertainty of a corrected strain depends on.
struct StrainReadings {
  ScaleReadings scale;
  ZeroScatter zero;
  units::Ratio noise;  ///< standard uncertainty of the reading itself at the level, true ratio
  double zeroSecondOrderVariance = 0;  ///< from zeroUncertainty(), (m/m)^2
};

/// Up to which the chain has to hold: what is expected, else a common strain of a proof load (common
/// practice, no source); of a transducer the rated value.
units::Strain largestStrain(const description::Channel& channel);

/// Tolerance of the gauge factor (a transducer: of its sensitivity) for the whole bridge, half-width: its
/// gauges by their shares in the signal, all off the same way (one batch).
units::Fraction factorTolerance(const description::Rack& rack, const description::Channel& channel);

/// The measurement behind corrected strain at several levels (for a transducer: fractions of the rated
/// value).
///
/// Output 0: by how much the amplifier's span is off what the steps gave, in percent. Output 1 + k: true
/// strain less corrected strain when levels[k] is shown, in m/m. Everything is kept as it was read (steps,
/// zero, the reading at the level); the circuit moves by what is not known of it, and the full network says
/// which span and which strain it would take to give these readings. The gauge factor is not in it: it scales
/// truth and nothing else. Errors: as scaleModel().
Result<metrology::Model> strainModel(const description::Rack& rack, const description::Channel& channel,
                                     const StrainReadings& readings, std::span<const units::Strain> levels);

/// By the GUM: first order with the inputs' own shapes convolved; where equal leads cancel to first order,
/// the zero's second-order terms (zeroModel) are counted.
/// @param factorTolerance  half-width, relative.
Result<std::vector<StrainUncertainty>> strainUncertainties(const description::Rack& rack,
                                                           const description::Channel& channel,
                                                           const StrainReadings& readings,
                                                           std::span<const units::Strain> levels,
                                                           units::Fraction factorTolerance);

}  // namespace shuntwright::calibration
