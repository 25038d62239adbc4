#pragma once

#include <vector>

#include "driver/core/random.h"

namespace shuntwright::sim {

/// 1/f noise as a sum of exponentially forgetting noises whose time constants stand a factor of four apart: a
/// spectral density that falls with 1/f within a few percent from 1/(2 pi longest) to 1/(2 pi shortest).
class Flicker {
 public:
  /// @param perDecade  standard deviation of what lies in one decade of frequency; 0: none, and nothing is drawn
  Flicker(double perDecade, double shortest_s, double longest_s, Random random);

  /// The noise `passed_s` after the last call.
  double after(double passed_s);

 private:
  struct Part {
    double timeConstant_s = 1, value = 0;
    double kept = 0, fresh = 0;  ///< for the last step
  };
  double deviation_ = 0;
  double lastStep_s_ = -1;
  std::vector<Part> parts_;
  Random random_;
};

}  // namespace shuntwright::sim
