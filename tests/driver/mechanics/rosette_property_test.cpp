#include <gtest/gtest.h>
#include <rapidcheck/gtest.h>

#include <cmath>
#include <numbers>

#include "driver/mechanics/rosette.h"

// What must hold for any plane strain, seen by any rosette.
namespace shuntwright::mechanics {
namespace {

using namespace units;
using description::RosetteLayout;

constexpr double kDegree = std::numbers::pi / 180;

double drawn(double low, double high) {
  constexpr int kSteps = 1 << 20;
  return low + (high - low) * *rc::gen::inRange(0, kSteps + 1) / kSteps;
}

std::array<TransverseSensitivity, 3> drawnTransverse() {
  std::array<TransverseSensitivity, 3> out;
  for (auto& k : out) k = {drawn(-0.05, 0.05) * one, drawn(0.25, 0.35)};
  return out;
}

RosetteLayout drawnLayout() {
  return *rc::gen::element(RosetteLayout::rectangular, RosetteLayout::delta);
}

/// Principal strains at an angle, turned as a tensor: Q diag(e1, e2) Q^T, written out by hand.
PlaneStrain turned(double major, double minor, double angle_rad) {
  const double c = std::cos(angle_rad), s = std::sin(angle_rad);
  return {(major * c * c + minor * s * s) * microstrain, (major * s * s + minor * c * c) * microstrain,
          2 * (major - minor) * s * c * microstrain};
}

RC_GTEST_PROP(RosetteProperties, TurnedStrainIsFoundFromTheGauges, ()) {
  const double minor = drawn(-5000, 5000), major = minor + drawn(10, 5000);
  const double angle = drawn(-89.9, 89.9) * kDegree;
  const auto layout = drawnLayout();
  const auto transverse = drawnTransverse();
  const Rosette rosette(layout, transverse);
  // Each gauge by the single-gauge relation, in the frame turned to it.
  Readings readings;
  for (std::size_t k = 0; k < 3; ++k) {
    const double at = (layout == RosetteLayout::delta ? 60.0 : 45.0) * static_cast<double>(k) * kDegree;
    const auto seen = turned(major, minor, angle - at);
    readings[k] = shownBy(transverse[k], seen.x, seen.y);
  }
  const auto p = principalOf(rosette.strainOf(readings), {});
  RC_ASSERT(std::abs(p.major.in(microstrain)-major) < 1e-8);
  RC_ASSERT(std::abs(p.minor.in(microstrain)-minor) < 1e-8);
  RC_ASSERT(std::abs(p.shear.in(microstrain) - (major - minor)) < 1e-8);
  RC_ASSERT(p.angle_rad.has_value());
  RC_ASSERT(std::abs(*p.angle_rad - angle) < 1e-10);
}

RC_GTEST_PROP(RosetteProperties, ForwardAndBackAgree, ()) {
  const Rosette rosette(drawnLayout(), drawnTransverse());
  const PlaneStrain e{drawn(-5000, 5000) * microstrain, drawn(-5000, 5000) * microstrain,
                      drawn(-5000, 5000) * microstrain};
  const auto back = rosette.strainOf(rosette.shownOf(e));
  RC_ASSERT(std::abs((back.x - e.x).in(microstrain)) < 1e-9);
  RC_ASSERT(std::abs((back.y - e.y).in(microstrain)) < 1e-9);
  RC_ASSERT(std::abs((back.shear - e.shear).in(microstrain)) < 1e-9);
}

/// Everything that a gradient has a row for, in strain, radian and pascal.
std::array<double, kPrincipalQuantities> all(const Rosette& rosette, const Readings& readings,
                                             const Elastic& elastic) {
  const auto p = principalOf(rosette.strainOf(readings), elastic);
  return {p.major.in(strain),       p.minor.in(strain),       *p.angle_rad,
          p.shear.in(strain),       p.majorStress.in(pascal), p.minorStress.in(pascal),
          p.shearStress.in(pascal), p.equivalent.in(pascal)};
}

RC_GTEST_PROP(RosetteProperties, GradientIsThatOfFiniteDifferences, ()) {
  const auto layout = *rc::gen::element(RosetteLayout::rectangular, RosetteLayout::delta, RosetteLayout::tee);
  const auto transverse = drawnTransverse();
  const Elastic elastic{drawn(50, 250) * gigapascal, drawn(0.2, 0.4)};
  const double minor = drawn(-3000, 3000), major = minor + drawn(200, 3000);
  const double angle = layout == RosetteLayout::tee ? *rc::gen::element(0.0, 90.0) : drawn(-85, 85);
  const auto readings = Rosette(layout, transverse).shownOf(turned(major, minor, angle * kDegree));
  const auto gradient = gradientOf(Rosette(layout, transverse), readings, elastic);
  RC_ASSERT(gradient.has_value());
  constexpr double kStep[kRosetteInputs] = {1e-8, 1e-8, 1e-8, 1e5, 1e-5, 1e-5, 1e-5, 1e-5};
  for (std::size_t input = 0; input < kRosetteInputs; ++input) {
    const auto moved = [&](double by) {
      auto r = readings;
      auto e = elastic;
      auto k = transverse;
      if (input < 3) r[input] += by * strain;
      if (input == 3) e.modulus += by * pascal;
      if (input == 4) e.poisson += by;
      if (input > 4) k[input - 5].value += by * one;
      return all(Rosette(layout, k), r, e);
    };
    const auto up = moved(kStep[input]), down = moved(-kStep[input]);
    for (std::size_t q = 0; q < kPrincipalQuantities; ++q) {
      // Against the whole scale of the quantity: what one percent of each input could move it by.
      const double difference = (up[q] - down[q]) / (2 * kStep[input]);
      const double largest = std::max(std::abs(difference), std::abs(gradient->rows[q][input]));
      const double floor = (q < 4 ? 1.0 : elastic.modulus.in(pascal)) * 1e-10 / kStep[input] * 1e-6;
      RC_ASSERT(std::abs(difference - gradient->rows[q][input]) <= 1e-5 * largest + floor + 1e-9);
    }
  }
}

}  // namespace
}  // namespace shuntwright::mechanics
