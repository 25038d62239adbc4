#pragma once

#include <memory>
#include <span>
#include <string>
#include <vector>

#include "driver/calibration/record.h"
#include "driver/core/error.h"
#include "driver/correction/live_correction.h"
#include "driver/description/rack.h"
#include "driver/device/sample_block.h"

namespace shuntwright::correction {

/// A column that follows from others.
struct DerivedColumn {
  std::string name;         ///< "S01.mechanical", "R1.major", "P1.axial", ...
  std::string unit;         ///< "microstrain", "deg", "MPa"
  bool calibrated = false;  ///< every gauge it follows from is
};

/// What comes after the map, sample by sample: strain without thermal effects and along the grid alone,
/// principal strains and stresses of rosettes, parts of pairs (formulas: driver/mechanics).
///
/// The columns of a device stand behind those of its inputs, so that recorders and viewers take them for
/// further inputs: the ratio is NaN, the flags are all those of the gauges it follows from. The thermometer
/// may be on another device: its latest good value counts, for one minute; without one the strain is NaN and
/// flagged as missing.
class DerivedChannels {
 public:
  DerivedChannels();  ///< of a rack that has none
  ~DerivedChannels();
  DerivedChannels(DerivedChannels&&) noexcept;
  DerivedChannels& operator=(DerivedChannels&&) noexcept;

  /// @param corrections  of the rack's devices; their order is what `device` counts below.
  /// Errors: not_found when a thermometer is on no device that is corrected, or the record lacks it.
  static Result<DerivedChannels> of(const description::Rack& rack, const calibration::Record& record,
                                    std::span<const LiveCorrection> corrections);

  const std::vector<DerivedColumn>& columns(std::size_t device) const;

  /// Whether blocks of this device are of any use here: it has derived columns or a thermometer.
  bool wants(std::size_t device) const;

  /// The block with derived columns behind its inputs.
  /// @param corrected  frames x block.inputs, as LiveCorrection gives it
  /// @param out, outCorrected  frames x (block.inputs + columns), no allocation once they are large enough
  void apply(std::size_t device, const device::SampleBlock& block, std::span<const float> corrected,
             device::SampleBlock& out, std::vector<float>& outCorrected);

 private:
  struct State;
  std::unique_ptr<State> state_;
};

}  // namespace shuntwright::correction
