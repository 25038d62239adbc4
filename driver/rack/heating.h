#pragma once

#include <optional>
#include <string>
#include <string_view>

#include "driver/description/diagnostics.h"
#include "driver/description/rack.h"

namespace shuntwright::rack {

/// What the excitation does to a channel's gauges.
struct GaugeHeating {
  double power_W = 0;                       ///< in each gauge: E^2 / (4 R), half of the excitation across it
  std::optional<double> density_W_per_m2;   ///< over the grid; unknown without a grid area
  std::optional<double> limit_W_per_m2;     ///< that the specimen carries away; unknown for a material without a figure
};

/// Errors: none; nothing for a transducer, whose maker has chosen its excitation.
std::optional<GaugeHeating> heatingOf(const description::Rack& rack, const description::Channel& channel);

/// Upper end of the usual range of power density for static work of moderate accuracy, by a word in the specimen's
/// description: "steel", "thin steel", "aluminium", "copper", "glass fibre", "ceramic", "plastic", ...
/// (heat-sink table after Dally and Riley, Experimental Stress Analysis; from memory).
std::optional<double> densityLimit_W_per_m2(std::string_view specimen);

/// Warns, with the excitation that would do, when a gauge gets more than its specimen carries away.
void warnOfHeating(const description::Rack& rack, description::Diagnostics& diagnostics);

}  // namespace shuntwright::rack
