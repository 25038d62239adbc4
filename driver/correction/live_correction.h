#pragma once

#include <span>
#include <string>
#include <vector>

#include "driver/calibration/record.h"
#include "driver/core/error.h"
#include "driver/correction/kernel.h"
#include "driver/description/rack.h"
#include "driver/device/sample_block.h"

namespace shuntwright::correction {

/// One input column of a device and the channel on it.
struct Column {
  std::string channel;       ///< empty: no channel on this input; its corrected values are NaN
  std::string unit;          ///< "microstrain", or a transducer's
  bool calibrated = false;   ///< passed; else the correction is nominal or a failed calibration's
  bridge::RationalMap map;   ///< reading in V/V -> strain (or fraction of rated value)
  double unitsPerStrain = 1; ///< shown value = map x this
};

/// What is applied to every sample of one device: channel by channel one rational map, in the shown unit.
class LiveCorrection {
 public:
  /// Errors: not_found when the record lacks a channel of this device; refused when it is of another rack or a channel
  /// has been changed since; bad_use when the device has no inputs.
  static Result<LiveCorrection> of(const description::Rack& rack, const calibration::Record& record,
                                   const std::string& device);

  const std::string& device() const { return device_; }
  const std::vector<Column>& columns() const { return columns_; }

  /// @param corrected frames x inputs, row-major, in each column's unit. No allocation.
  void apply(const device::SampleBlock& block, std::span<float> corrected) const;

 private:
  LiveCorrection(std::string device, std::vector<Column> columns);
  std::string device_;
  std::vector<Column> columns_;
  Kernel kernel_;
};

}  // namespace shuntwright::correction
