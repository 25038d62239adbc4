#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "driver/core/error.h"
#include "driver/description/rack.h"
#include "sim/fault/scenario.h"

namespace shuntwright::dev {

/// How often the truth lay inside what was stated of one quantity.
struct Coverage {
  std::string quantity;  ///< "span", "strain at 50 %", ...
  int racks = 0;
  double gum_percent = 0;         ///< share inside the interval by the GUM
  double monteCarlo_percent = 0;  ///< inside that by JCGM 101; NaN: not asked for
  double medianWidth = 0;  ///< of the GUM's half-width, over that of the interval which really holds 95.45 %
};

struct CoverageOptions {
  int racks = 300;
  int trials = 1000;  ///< of each Monte Carlo; 0: none
  std::uint64_t seed = 1;
  /// What really is: tolerances may differ from those that the driver is told of. nullptr: the same rack.
  const description::Rack* truth = nullptr;
  sim::Imperfections imperfections;
  double scatter = 1;  ///< of the samples, of which the driver is told so much
};

/// Draws racks about what is stated of one channel, calibrates that channel on the simulator's input (filter,
/// noise, mains, drift, converter), lets the leads warm for a while and loads it. Scores the amplifier's
/// span, the strain at 0, a quarter, a half and all of the largest strain, with the gauge factor set aside,
/// and the last one with it. Errors: what keeps a channel from being analysed, with the number of the rack.
Result<std::vector<Coverage>> coverageOf(const description::Rack& rack, const std::string& channel,
                                         const CoverageOptions& options);

}  // namespace shuntwright::dev
