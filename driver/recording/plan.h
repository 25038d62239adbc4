#pragma once

#include <array>
#include <cstdint>
#include <string>
#include <vector>

#include "driver/calibration/record.h"
#include "driver/core/clock.h"
#include "driver/correction/derived_channels.h"
#include "driver/correction/live_correction.h"
#include "driver/description/rack.h"

namespace shuntwright::recording {

/// One channel as it is kept: which input it was, its unit and the coefficients that join raw and corrected. A
/// column that follows from others has no raw value of its own: its coefficients are NaN.
struct RecordedChannel {
  std::string name;
  std::string unit;
  int column = 0;            ///< of the device's sample blocks
  bool calibrated = false;
  double p = 0, q = 0, w = 0;  ///< u = (p r + q) / (1 + w r), r in V/V
  double unitsPerStrain = 1;
  std::array<double, 4> bend{};  ///< value = unitsPerStrain (u + b2 u^2 + b3 u^3 + b4 u^4 + b5 u^5)
};

struct RecordedDevice {
  std::string name;
  double rate_Hz = 0;
  std::vector<RecordedChannel> channels;
};

/// Everything that a file says about itself.
struct RecordingPlan {
  std::string software;
  std::string rackName;
  std::string rackText;       ///< the rack file as it was
  std::string calibrationId;
  std::string calibrationJson;
  Instant started;
  std::vector<RecordedDevice> devices;
  double secondsPerFile = 3600;        ///< room in one file; a fuller recording rolls over to the next
  std::uint64_t eventBytes = 1 << 20;  ///< room for marks and events in one file
  Nanoseconds commitEvery = std::chrono::milliseconds(400);  ///< data on disk at least this often
};

/// The plan for a rack with this calibration in force. Errors: those of LiveCorrection.
RecordingPlan planOf(const description::Rack& rack, const calibration::Record& record, std::string recordJson,
                     const std::vector<correction::LiveCorrection>& corrections, Instant started,
                     const correction::DerivedChannels& derived = {});

}  // namespace shuntwright::recording
