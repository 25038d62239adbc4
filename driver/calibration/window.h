#pragma once

#include <cstddef>
#include <cstdint>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/core/task.h"
#include "driver/device/device.h"
#include "driver/units/units.h"

namespace shuntwright::calibration {

/// The samples of one input averaged for one reading.
struct Window {
  units::Ratio mean;
  units::Ratio deviation;   ///< standard deviation of a sample about a straight line through the window
  units::Ratio successive;  ///< root mean square of the difference between neighbouring samples
  units::Ratio drift;       ///< of that line, first sample to last
  int samples = 0;          ///< used
  int saturated = 0;
  int missing = 0;
  int lost = 0;             ///< frames lost or damaged on the wire inside the window
  Instant start, end;

  bool usable() const { return samples >= 2 && saturated == 0; }
};

/// Gathers one input's samples into a window. Samples that are saturated or missing are counted and left out.
class WindowBuilder {
 public:
  void add(Instant when, float ratio, std::uint8_t flags);
  /// Counts what was lost just before the first frame of a block.
  void noteGap(const device::SampleBlock& block);
  int seen() const { return window_.samples + window_.saturated + window_.missing; }
  Window window() const;

 private:
  Window window_;
  // A straight line by running sums about the first sample, so that nothing is stored or cancelled away.
  double previous_ = 0, successive_ = 0;
  double origin_ = 0, meanX_ = 0, meanY_ = 0, sxx_ = 0, syy_ = 0, sxy_ = 0;
};

/// Takes windows from an amplifier that is acquiring. What comes before a window's start is dropped.
class WindowReader {
 public:
  WindowReader(device::Device& amplifier, Clock& clock, units::Frequency rate);

  /// The mean of the first `count` samples of one input taken at or after `notBefore`. Errors: timeout when they
  /// do not come within three times their due time and two seconds, or the device's.
  Task<Result<Window>> take(std::size_t input, Instant notBefore, int count);

 private:
  device::Device& amplifier_;
  Clock& clock_;
  units::Frequency rate_;
  device::SampleBlock block_;
  std::size_t next_ = 0;
};

}  // namespace shuntwright::calibration
