#pragma once

#include "driver/units/quantity.h"

namespace shuntwright::units {

// clang-format off
namespace kind {
struct Resistance; struct Voltage; struct Ratio; struct Strain; struct Fraction; struct Length;
struct Force; struct Stress; struct Frequency; struct Area; struct TemperatureDifference;
struct TemperatureCoefficient;
}

using Resistance = Quantity<kind::Resistance>;
using Voltage = Quantity<kind::Voltage>;
using Ratio = Quantity<kind::Ratio>;            ///< bridge signal / excitation
using Strain = Quantity<kind::Strain>;
using Fraction = Quantity<kind::Fraction>;      ///< tolerances, Poisson's ratio, transverse sensitivity
using Length = Quantity<kind::Length>;
using Force = Quantity<kind::Force>;
using Stress = Quantity<kind::Stress>;
using Frequency = Quantity<kind::Frequency>;
using Area = Quantity<kind::Area>;
using TemperatureDifference = Quantity<kind::TemperatureDifference>;
using TemperatureCoefficient = Quantity<kind::TemperatureCoefficient>;

inline constexpr Unit<kind::Resistance> ohm{1}, milliohm{1e-3}, kiloohm{1e3}, megaohm{1e6}, gigaohm{1e9};
inline constexpr Unit<kind::Voltage> volt{1}, millivolt{1e-3}, microvolt{1e-6};
inline constexpr Unit<kind::Ratio> volt_per_volt{1}, millivolt_per_volt{1e-3}, microvolt_per_volt{1e-6};
inline constexpr Unit<kind::Strain> strain{1}, microstrain{1e-6};
inline constexpr Unit<kind::Fraction> one{1}, percent{1e-2}, ppm{1e-6};
inline constexpr Unit<kind::Length> metre{1}, millimetre{1e-3};
inline constexpr Unit<kind::Force> newton{1}, kilonewton{1e3};
inline constexpr Unit<kind::Stress> pascal{1}, megapascal{1e6}, gigapascal{1e9};
inline constexpr Unit<kind::Frequency> hertz{1}, kilohertz{1e3};
inline constexpr Unit<kind::Area> square_metre{1}, square_millimetre{1e-6};
inline constexpr Unit<kind::TemperatureDifference> kelvin{1};
inline constexpr Unit<kind::TemperatureCoefficient> per_kelvin{1}, ppm_per_kelvin{1e-6};
// clang-format on

/// A point on the Celsius scale. Points differ by a TemperatureDifference; they never add.
class Temperature {
 public:
  constexpr Temperature() = default;
  static constexpr Temperature celsius(double value) { return Temperature(value); }
  constexpr double celsius() const { return celsius_; }

  friend constexpr TemperatureDifference operator-(Temperature a, Temperature b) {
    return (a.celsius_ - b.celsius_) * kelvin;
  }
  friend constexpr Temperature operator+(Temperature a, TemperatureDifference d) {
    return Temperature(a.celsius_ + d.in(kelvin));
  }
  friend constexpr auto operator<=>(Temperature, Temperature) = default;

 private:
  explicit constexpr Temperature(double value) : celsius_(value) {}
  double celsius_ = 20;
};

/// Relative change of a resistance per strain, (dR/R)/strain. A plain number of its own type, so that it
/// is never taken for a ratio or a tolerance.
class GaugeFactor {
 public:
  constexpr GaugeFactor() = default;
  explicit constexpr GaugeFactor(double value) : value_(value) {}
  constexpr double value() const { return value_; }
  friend constexpr auto operator<=>(GaugeFactor, GaugeFactor) = default;

 private:
  double value_ = 2.0;
};

/// Dimensionless temperature effect: coefficient times difference.
constexpr Fraction operator*(TemperatureCoefficient a, TemperatureDifference d) {
  return a.in(per_kelvin) * d.in(kelvin) * one;
}

}  // namespace shuntwright::units
