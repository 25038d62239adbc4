#include "driver/units/copper.h"

#include <cmath>
#include <numbers>

namespace shuntwright::units {
namespace {

constexpr Temperature kReference = Temperature::celsius(20);

double warmth(Temperature t) { return 1 + (kCopperCoefficient * (t - kReference)).in(one); }

}  // namespace

Resistance copperLead(Length length, int awg, Temperature temperature) {
  const double diameter_m = 0.127e-3 * std::pow(92.0, (36.0 - awg) / 39.0);
  const double area_m2 = std::numbers::pi / 4 * diameter_m * diameter_m;
  constexpr double kConductivity_S_per_m = 58e6;
  return (length.in(metre) / (kConductivity_S_per_m * area_m2)) * warmth(temperature) * ohm;
}

Resistance copperAt(Resistance known, Temperature at, Temperature wanted) {
  return known * (warmth(wanted) / warmth(at));
}

}  // namespace shuntwright::units
