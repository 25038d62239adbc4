#pragma once

#include <cstddef>
#include <cstdint>
#include <vector>

#include "driver/core/clock.h"

namespace shuntwright::device {

/// Flags of one sample of one channel.
enum SampleFlag : std::uint8_t {
  kSaturated = 1,  ///< the device says, or full scale is reached
  kMissing = 2,    ///< the device sent no value; the ratio is NaN
  kSwitching = 4,  ///< a relay was closed or settling
};

/// Samples of all inputs of one device, in order of time: the one type at which acquisition, calibration,
/// recording and viewers meet.
///
/// Shape: `frames` rows of `inputs` columns, row-major; column k is the device's k-th input. Ratios in V/V.
struct SampleBlock {
  std::size_t inputs = 0;
  std::vector<Instant> time;        ///< one a frame
  std::vector<float> ratio;         ///< frames x inputs
  std::vector<std::uint8_t> flags;  ///< frames x inputs
  std::uint64_t lostBefore = 0;  ///< frames that the device's counter says were lost just before this block
  std::uint64_t damagedBefore = 0;  ///< lines that could not be read, and restarts of the device's counter, just before this block

  std::size_t frames() const { return time.size(); }
  float at(std::size_t frame, std::size_t input) const { return ratio[frame * inputs + input]; }
  std::uint8_t flagsAt(std::size_t frame, std::size_t input) const { return flags[frame * inputs + input]; }
};

}  // namespace shuntwright::device
