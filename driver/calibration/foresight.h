#pragma once

#include <optional>
#include <string>

#include "driver/calibration/record.h"
#include "driver/core/random.h"
#include "driver/description/rack.h"
#include "driver/metrology/monte_carlo.h"

namespace shuntwright::calibration {

/// The one thing to measure or to buy that would narrow a channel's uncertainty most.
struct Advice {
  std::string what;       ///< "measure each gauge to 0.02 %"
  double to_percent = 0;  ///< expanded uncertainty that would be left
};

/// What a channel's correction will be worth, before any hardware is touched.
struct Foresight {
  Budget budget;                 ///< of the scale, with steps as predicted; the readings' noise is not in it
  std::string largest;           ///< the input that contributes most
  std::optional<LeadIdentification> leads;  ///< where they are to be identified
  StrainUncertainty atLargest;   ///< of a corrected strain, at the largest expected, zero included
  std::optional<Advice> advice;  ///< nothing when no single measurement takes off a tenth
};

/// From rack and profiles alone: a balanced bridge, steps as predicted, readings without noise. The advice
/// tries a measured gauge (0.02 %), certified shunt resistors (0.01 %), measured leads (20 mohm), a leads'
/// temperature known to 1 K and a completion resistor of 0.01 %, each alone (common practice, no source).
/// Errors: bad_use when the channel has no shunt or makes no bridge.
Result<Foresight> foresee(const description::Rack& rack, const description::Channel& channel);

/// A second opinion on the same budget: Monte Carlo of the same measurement (JCGM 101), and whether the
/// stated uncertainty agrees with its symmetric interval to one digit (JCGM 101 8.1). Errors: as foresee().
struct SecondOpinion {
  metrology::Interval interval;  ///< percent of the scale, 95.45 %
  std::size_t trials = 0;
  bool agrees = false;
};
Result<SecondOpinion> secondOpinion(const description::Rack& rack, const description::Channel& channel,
                                    const Budget& stated, Random& random);

}  // namespace shuntwright::calibration
