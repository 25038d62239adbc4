#pragma once

#include <span>
#include <vector>

#include "driver/calibration/claims.h"
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

/// The measurement behind a channel's claims when its span comes from its steps: outputs are those of Claims.
/// Everything is kept as it was read (steps, zero, the reading at the level); the circuit moves by what is
/// not known of it, and the full network says which span and which strain it would take to give these
/// readings. The gauge factor is not in it: it scales truth and nothing else. Errors: as scaleModel().
Result<metrology::Model> strainModel(const description::Rack& rack, const description::Channel& channel,
                                     const StrainReadings& readings, std::span<const units::Strain> levels);

/// What adds straight to the strains: noise and resolution of zero and reading, zero return, the amplifier's
/// offset.
struct AddedInput {
  metrology::Input input;
  std::size_t output = 0;  ///< of Claims
};
std::vector<AddedInput> readingScatter(const StrainReadings& readings, double slope_per_strain,
                                       std::size_t levels);

/// Expanded uncertainty of corrected strain by the GUM: first order with the inputs' own shapes convolved;
/// where equal leads cancel to first order, the zero's second-order terms are counted.
/// @param model                    of strainModel() or identifiedModel(), for these levels.
/// @param factorTolerance          half-width, relative.
/// @param zeroSecondOrderVariance  from zeroUncertainty(), (m/m)^2.
Result<std::vector<StrainUncertainty>> strainUncertainties(const metrology::Model& model,
                                                           std::span<const units::Strain> levels,
                                                           units::Fraction factorTolerance,
                                                           double zeroSecondOrderVariance);

}  // namespace shuntwright::calibration
