#pragma once

#include <array>
#include <cstddef>
#include <optional>

#include "driver/description/rosette.h"
#include "driver/mechanics/transverse.h"
#include "driver/units/units.h"

namespace shuntwright::mechanics {

using Readings =
    std::array<units::Strain, 3>;  ///< in the order of the layout; a tee's third is not looked at
using Matrix3 = std::array<std::array<double, 3>, 3>;

/// Strain in the plane of the surface; x along the rosette's first gauge, y 90 degrees counter-clockwise.
struct PlaneStrain {
  units::Strain x, y;
  units::Strain shear;  ///< engineering shear strain, gamma_xy

  /// Normal strain at an angle (counter-clockwise from x).
  units::Strain at(double angle_rad) const;
};

/// Elastic constants of the specimen.
struct Elastic {
  units::Stress modulus = 210.0 * units::gigapascal;
  double poisson = 0.3;
};

/// Stress in the plane of the surface, along the same axes as the strain.
struct PlaneStress {
  units::Stress x, y, shear;
};

/// Hooke's law in plane stress: s_x = E/(1 - nu^2) (e_x + nu e_y), t_xy = E/(2 (1 + nu)) gamma_xy.
PlaneStress stressOf(const PlaneStrain& strain, const Elastic& elastic);

/// Principal strains and, by Hooke's law in plane stress, principal stresses of one spot.
struct Principal {
  units::Strain major, minor;  ///< algebraically, major >= minor
  /// From the first gauge to the axis of the major strain, counter-clockwise (the sense in which the gauges
  /// are numbered) positive, in (-90, 90] degrees. Empty where no direction is told apart: equal biaxial
  /// strain.
  std::optional<double> angle_rad;
  units::Strain shear;  ///< largest engineering shear strain in the plane, major - minor
  units::Stress majorStress, minorStress, shearStress;
  units::Stress equivalent;  ///< von Mises
};

/// Rows and columns of a Gradient.
enum class PrincipalQuantity {
  major,
  minor,
  angle,
  shear,
  major_stress,
  minor_stress,
  shear_stress,
  equivalent
};
enum class RosetteInput {
  first,
  second,
  third,
  modulus,
  poisson,
  transverse_first,
  transverse_second,
  transverse_third
};
inline constexpr std::size_t kPrincipalQuantities = 8, kRosetteInputs = 8;

/// Exact partial derivatives [quantity][input] for the propagation of uncertainty, in strain, radian, pascal
/// and fractions.
struct Gradient {
  std::array<std::array<double, kRosetteInputs>, kPrincipalQuantities> rows{};
  double of(PrincipalQuantity quantity, RosetteInput input) const {
    return rows[static_cast<std::size_t>(quantity)][static_cast<std::size_t>(input)];
  }
};

/// Three gauges on one spot. Each shows (e(a) + Kt e(a + 90)) / (1 - nu0 Kt) at its angle a, linear in the
/// plane strain: what is kept is the inverse of those three equations, so the transverse correction is exact
/// for any mix of transverse sensitivities. Strains are small (linear theory: about 1 % at most).
class Rosette {
 public:
  explicit Rosette(description::RosetteLayout layout, std::array<TransverseSensitivity, 3> transverse = {});

  PlaneStrain strainOf(const Readings& shown) const;
  /// What the gauges show of a plane strain: the forward model.
  Readings shownOf(const PlaneStrain& strain) const;
  /// d(x, y, shear) / d(readings).
  const Matrix3& inverse() const { return inverse_; }

  /// @param angle_rad  of a gauge from the first one
  double angle_rad(std::size_t gauge) const { return angles_rad_[gauge]; }

 private:
  friend std::optional<Gradient> gradientOf(const Rosette&, const Readings&, const Elastic&, units::Strain);
  std::array<double, 3> angles_rad_{};
  std::array<TransverseSensitivity, 3> transverse_;
  std::size_t gauges_;
  Matrix3 forward_{}, inverse_{};
};

/// @param leastShear  below it no direction is stated; 0 still refuses one within rounding of equal biaxial
/// strain.
Principal principalOf(const PlaneStrain& strain, const Elastic& elastic, units::Strain leastShear = {});

/// Empty where the strain is equal biaxial, by the same rule as the angle: the derivatives do not exist
/// there, and close to it the linear propagation is no good: propagate distributions instead.
std::optional<Gradient> gradientOf(const Rosette& rosette, const Readings& shown, const Elastic& elastic,
                                   units::Strain leastShear = {});

}  // namespace shuntwright::mechanics
