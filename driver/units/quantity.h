#pragma once

#include <compare>

namespace shuntwright::units {

template <class Kind>
struct Unit {
  double scale;  ///< how many of the kind's base unit one of these is
};

/// A quantity whose type carries its kind; the unit is named where it goes in and where it comes out:
///     Resistance r = 120.0 * ohm;   double x = r.in(kiloohm);
/// Only same kinds add, subtract and compare; scaling by a number keeps the kind; a ratio of two is a
/// number. Values are kept in the kind's base unit.
template <class Kind>
class Quantity {
 public:
  constexpr Quantity() = default;
  static constexpr Quantity of(double value, Unit<Kind> unit) { return Quantity(value * unit.scale); }

  constexpr double in(Unit<Kind> unit) const { return base_ / unit.scale; }

  constexpr Quantity operator-() const { return Quantity(-base_); }
  constexpr Quantity& operator+=(Quantity other) {
    base_ += other.base_;
    return *this;
  }
  constexpr Quantity& operator-=(Quantity other) {
    base_ -= other.base_;
    return *this;
  }
  friend constexpr Quantity operator+(Quantity a, Quantity b) { return Quantity(a.base_ + b.base_); }
  friend constexpr Quantity operator-(Quantity a, Quantity b) { return Quantity(a.base_ - b.base_); }
  friend constexpr Quantity operator*(double k, Quantity q) { return Quantity(k * q.base_); }
  friend constexpr Quantity operator*(Quantity q, double k) { return Quantity(k * q.base_); }
  friend constexpr Quantity operator/(Quantity q, double k) { return Quantity(q.base_ / k); }
  friend constexpr double operator/(Quantity a, Quantity b) { return a.base_ / b.base_; }
  friend constexpr auto operator<=>(Quantity, Quantity) = default;

 private:
  explicit constexpr Quantity(double base) : base_(base) {}
  double base_ = 0;
};

template <class Kind>
constexpr Quantity<Kind> operator*(double value, Unit<Kind> unit) {
  return Quantity<Kind>::of(value, unit);
}

}  // namespace shuntwright::units
