#pragma once

#include <memory>
#include <span>
#include <string>
#include <vector>

#include "driver/core/error.h"
#include "driver/recording/event_line.h"
#include "driver/recording/reader.h"

namespace shuntwright::recording {

/// Mean of one channel over one hold, in its unit.
struct StepMean {
  std::string channel;
  std::string unit;
  double mean = 0;
  double deviation = 0;   ///< standard deviation of a sample
  std::uint64_t samples = 0;  ///< used; flagged ones are left out
};

/// A hold between two marks.
struct LoadStep {
  std::string label;
  Instant begin, end;
  std::vector<StepMean> channels;  ///< every channel of every device
};

/// The holds of a recording, in order: each "step begin" event up to the next "step end" (or the end of the last part);
/// one that runs on from part to part is one hold. Errors: the reader's.
/// @param parts  of one recording, in order
Result<std::vector<LoadStep>> loadSteps(std::span<const std::unique_ptr<Reader>> parts);

}  // namespace shuntwright::recording
