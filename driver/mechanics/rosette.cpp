#include "driver/mechanics/rosette.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>

namespace shuntwright::mechanics {

using namespace units;
using description::RosetteLayout;

namespace {

using Row = std::array<double, 3>;

constexpr double kQuarterTurn = std::numbers::pi / 2;

/// Normal strain at an angle, as a row over (x, y, shear): the transformation of plane strain.
Row normalAt(double angle_rad) {
  const double c = std::cos(angle_rad), s = std::sin(angle_rad);
  return {c * c, s * s, s * c};
}

double dot(const Row& a, const Row& b) {
  return a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
}

Row cross(const Row& a, const Row& b) {
  return {a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]};
}

/// By cofactors. The rows of a rosette are far from dependent.
Matrix3 inverted(const Matrix3& m) {
  const Row a = cross(m[1], m[2]), b = cross(m[2], m[0]), c = cross(m[0], m[1]);
  const double determinant = dot(m[0], a);
  Matrix3 out;
  for (std::size_t k = 0; k < 3; ++k) out[k] = {a[k] / determinant, b[k] / determinant, c[k] / determinant};
  return out;
}

Row rowOf(const PlaneStrain& e) {
  return {e.x.in(strain), e.y.in(strain), e.shear.in(strain)};
}

/// Mohr's circle: everything principal follows from its centre and radius.
struct Circle {
  double centre, radius;
  double cosine, sine;  ///< (x - y)/2 and shear/2: radius times that of twice the angle
  bool directed;
};

Circle circleOf(const PlaneStrain& e, Strain leastShear) {
  const auto [x, y, shear] = rowOf(e);
  Circle out{(x + y) / 2, 0, (x - y) / 2, shear / 2, false};
  out.radius = std::hypot(out.cosine, out.sine);
  const double rounding = 16 * std::numeric_limits<double>::epsilon() * std::max(std::abs(x), std::abs(y));
  out.directed = out.radius > rounding && 2 * out.radius >= leastShear.in(strain);
  return out;
}

}  // namespace

Strain PlaneStrain::at(double angle_rad) const {
  return dot(normalAt(angle_rad), rowOf(*this)) * strain;
}

Rosette::Rosette(RosetteLayout layout, std::array<TransverseSensitivity, 3> transverse)
    : transverse_(transverse), gauges_(description::gaugesOf(layout)) {
  const double step = layout == RosetteLayout::rectangular ? std::numbers::pi / 4
                      : layout == RosetteLayout::delta     ? std::numbers::pi / 3
                                                           : kQuarterTurn;
  for (std::size_t k = 0; k < gauges_; ++k) {
    angles_rad_[k] = step * static_cast<double>(k);
    const double kt = transverse_[k].value.in(one), scale = 1 - transverse_[k].makersPoisson * kt;
    const Row along = normalAt(angles_rad_[k]), across = normalAt(angles_rad_[k] + kQuarterTurn);
    for (std::size_t j = 0; j < 3; ++j) forward_[k][j] = (along[j] + kt * across[j]) / scale;
  }
  // A tee's gauges lie along the principal directions, where there is no shear strain.
  if (gauges_ == 2) {
    forward_[0][2] = forward_[1][2] = 0;
    forward_[2] = {0, 0, 1};
  }
  inverse_ = inverted(forward_);
}

PlaneStrain Rosette::strainOf(const Readings& shown) const {
  const Row h{shown[0].in(strain), shown[1].in(strain), gauges_ == 2 ? 0 : shown[2].in(strain)};
  return {dot(inverse_[0], h) * strain, dot(inverse_[1], h) * strain, dot(inverse_[2], h) * strain};
}

Readings Rosette::shownOf(const PlaneStrain& e) const {
  const Row row = rowOf(e);
  return {dot(forward_[0], row) * strain, dot(forward_[1], row) * strain,
          (gauges_ == 2 ? 0 : dot(forward_[2], row)) * strain};
}

PlaneStress stressOf(const PlaneStrain& e, const Elastic& elastic) {
  const double nu = elastic.poisson;
  const Stress plane = elastic.modulus / (1 - nu * nu);
  return {plane * (e.x + nu * e.y).in(strain), plane * (e.y + nu * e.x).in(strain),
          elastic.modulus * (e.shear.in(strain) / (2 * (1 + nu)))};
}

Principal principalOf(const PlaneStrain& e, const Elastic& elastic, Strain leastShear) {
  const Circle m = circleOf(e, leastShear);
  const double E_Pa = elastic.modulus.in(pascal), nu = elastic.poisson;
  // Plane stress: E/(1-nu^2) (e1 + nu e2) = E c/(1-nu) + E r/(1+nu).
  const double mean_Pa = E_Pa * m.centre / (1 - nu), shear_Pa = E_Pa * m.radius / (1 + nu);
  Principal out;
  out.major = (m.centre + m.radius) * strain;
  out.minor = (m.centre - m.radius) * strain;
  if (m.directed) out.angle_rad = std::atan2(m.sine, m.cosine) / 2;
  // atan2 of a negative zero: the minor end of the half-open interval is the same axis.
  if (out.angle_rad && *out.angle_rad <= -kQuarterTurn) *out.angle_rad = kQuarterTurn;
  out.shear = 2 * m.radius * strain;
  out.majorStress = (mean_Pa + shear_Pa) * pascal;
  out.minorStress = (mean_Pa - shear_Pa) * pascal;
  out.shearStress = shear_Pa * pascal;
  out.equivalent = std::hypot(mean_Pa, std::sqrt(3.0) * shear_Pa) * pascal;
  return out;
}

std::optional<Gradient> gradientOf(const Rosette& rosette, const Readings& shown, const Elastic& elastic,
                                   Strain leastShear) {
  const PlaneStrain e = rosette.strainOf(shown);
  const Circle m = circleOf(e, leastShear);
  if (!m.directed) return std::nullopt;
  const double E_Pa = elastic.modulus.in(pascal), nu = elastic.poisson;
  const double mean_Pa = E_Pa * m.centre / (1 - nu), shear_Pa = E_Pa * m.radius / (1 + nu);
  const double equivalent_Pa = std::hypot(mean_Pa, std::sqrt(3.0) * shear_Pa);
  Gradient out;
  // One input at a time: how far it moves the circle, and how far it moves the elastic constants' parts.
  const auto put = [&](std::size_t input, const Row& moved, double mean_moved_Pa, double shear_moved_Pa) {
    const double centre = (moved[0] + moved[1]) / 2, cosine = (moved[0] - moved[1]) / 2, sine = moved[2] / 2;
    const double radius = (m.cosine * cosine + m.sine * sine) / m.radius;
    const double mean = E_Pa * centre / (1 - nu) + mean_moved_Pa,
                 tau = E_Pa * radius / (1 + nu) + shear_moved_Pa;
    const std::array<double, kPrincipalQuantities> column{
        centre + radius,
        centre - radius,
        (m.cosine * sine - m.sine * cosine) / (2 * m.radius * m.radius),
        2 * radius,
        mean + tau,
        mean - tau,
        tau,
        (mean_Pa * mean + 3 * shear_Pa * tau) / equivalent_Pa,
    };
    for (std::size_t q = 0; q < kPrincipalQuantities; ++q) out.rows[q][input] = column[q];
  };
  const auto inverseColumn = [&](std::size_t k, double by) {
    return Row{rosette.inverse_[0][k] * by, rosette.inverse_[1][k] * by, rosette.inverse_[2][k] * by};
  };
  for (std::size_t k = 0; k < rosette.gauges_; ++k) {
    put(k, inverseColumn(k, 1), 0, 0);
    // A larger Kt would have shown more by d(shown)/dKt = (across + nu0 along) / (1 - nu0 Kt)^2.
    const auto& kt = rosette.transverse_[k];
    const double along = e.at(rosette.angles_rad_[k]).in(strain);
    const double across = e.at(rosette.angles_rad_[k] + kQuarterTurn).in(strain);
    const double scale = 1 - kt.makersPoisson * kt.value.in(one);
    put(static_cast<std::size_t>(RosetteInput::transverse_first) + k,
        inverseColumn(k, -(across + kt.makersPoisson * along) / (scale * scale)), 0, 0);
  }
  put(static_cast<std::size_t>(RosetteInput::modulus), {}, mean_Pa / E_Pa, shear_Pa / E_Pa);
  put(static_cast<std::size_t>(RosetteInput::poisson), {}, mean_Pa / (1 - nu), -shear_Pa / (1 + nu));
  return out;
}

}  // namespace shuntwright::mechanics
