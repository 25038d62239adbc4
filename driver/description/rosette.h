#pragma once

#include <string>
#include <vector>

#include "driver/core/error.h"
#include "driver/units/units.h"

namespace shuntwright::description {

/// Angles of the gauges from the first one, counter-clockwise.
enum class RosetteLayout {
  rectangular,  ///< 0, 45, 90 degrees
  delta,        ///< 0, 60, 120 degrees
  tee,  ///< 0, 90 degrees: only where the principal directions are known and the gauges lie along them
};

/// Channels whose gauges sit on one spot.
struct Rosette {
  Place place;
  std::string name;
  RosetteLayout layout = RosetteLayout::rectangular;
  std::vector<std::string> channels;  ///< in the order of the layout's angles; two for a tee, else three
  units::Stress modulus = 210.0 * units::gigapascal;
  double poisson = 0.3;  ///< of the specimen
};

/// Two gauges on opposite faces of a section.
struct Pair {
  Place place;
  std::string name;
  std::vector<std::string> channels;  ///< two
  /// Distance of the first gauge to the neutral axis over the distance of both gauges.
  double firstPart = 0.5;
};

inline std::size_t gaugesOf(RosetteLayout layout) {
  return layout == RosetteLayout::tee ? 2 : 3;
}

}  // namespace shuntwright::description
