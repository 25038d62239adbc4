#pragma once

#include "driver/units/units.h"

namespace shuntwright::mechanics {

/// Strain of a section, from two gauges on its two faces.
struct AxialAndBending {
  units::Strain axial;    ///< at the neutral axis
  units::Strain bending;  ///< that the first gauge sees beyond the axial part
};

/// Plane sections stay plane: strain is linear between the faces.
/// @param firstPart  how much of the way from the second gauge to the first the neutral axis stands away from
/// the
///                   first: its distance to the axis over the distance of both gauges. 1/2 in a symmetric
///                   section, where axial = (a + b)/2 and bending = (a - b)/2.
constexpr AxialAndBending axialAndBending(units::Strain first, units::Strain second, double firstPart = 0.5) {
  const units::Strain bending = (first - second) * firstPart;
  return {first - bending, bending};
}

}  // namespace shuntwright::mechanics
