#pragma once

#include "driver/units/units.h"

namespace shuntwright::mechanics {

/// Poisson's ratio of the bar on which makers find the gauge factor (steel, uniaxial stress).
inline constexpr double kMakersPoisson = 0.285;

/// How much a gauge feels the strain across its grid: K_transverse / K_axial.
struct TransverseSensitivity {
  units::Fraction value;
  double makersPoisson = kMakersPoisson;
};

/// What a gauge shows in a biaxial field: (along + Kt across) / (1 - nu0 Kt). The denominator is there
/// because the packet's factor already holds the maker's own transverse strain, -nu0 times the axial one.
constexpr units::Strain shownBy(TransverseSensitivity kt, units::Strain along, units::Strain across) {
  const double k = kt.value.in(units::one);
  return (along + k * across) / (1 - kt.makersPoisson * k);
}

/// Strain along the grid of a single gauge in a field whose ratio across/along is known (-nu under uniaxial
/// stress, 1 in equal biaxial strain): shown (1 - nu0 Kt) / (1 + Kt ratio).
constexpr units::Strain alongGrid(TransverseSensitivity kt, units::Strain shown, double acrossPerAlong) {
  const double k = kt.value.in(units::one);
  return shown * ((1 - kt.makersPoisson * k) / (1 + k * acrossPerAlong));
}

}  // namespace shuntwright::mechanics
