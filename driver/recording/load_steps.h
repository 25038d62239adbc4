#pragma once

#include <string>
#include <vector>

#include "driver/core/error.h"
#include "driver/recording/reader.h"

namespace shuntwright::recording {

inline constexpr const char* kStepBegin = "step begin";
inline constexpr const char* kStepEnd = "step end";

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

/// The holds of a file, in order: each "step begin" event up to the next "step end" (or the end of the file).
/// Errors: the reader's.
Result<std::vector<LoadStep>> loadSteps(const Reader& reader);

}  // namespace shuntwright::recording
