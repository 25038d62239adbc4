#include "driver/mechanics/platinum.h"

#include <cmath>
#include <string>

namespace shuntwright::mechanics {

using namespace units;

namespace {

// IEC 60751.
constexpr double kA = 3.9083e-3, kB = -5.775e-7, kC = -4.183e-12;
constexpr double kLeast_C = -200, kMost_C = 850;

double relative(double t) {
  const double above = 1 + t * (kA + t * kB);
  return t >= 0 ? above : above + kC * (t - 100) * t * t * t;
}

double slope(double t) {
  const double above = kA + 2 * kB * t;
  return t >= 0 ? above : above + kC * t * t * (4 * t - 300);
}

}  // namespace

Result<Resistance> platinumResistance(Temperature t, Resistance atZero) {
  if (!(t.celsius() >= kLeast_C && t.celsius() <= kMost_C)) {
    return fail(ErrorCode::bad_use, "a platinum thermometer is defined from -200 to 850 degC, not at " +
                                        std::to_string(t.celsius()) + " degC");
  }
  return atZero * relative(t.celsius());
}

Result<Temperature> platinumTemperature(Resistance r, Resistance atZero) {
  const double w = r / atZero;
  constexpr double kRounding = 1e-6;  // a printed table's end still counts
  if (!(w >= relative(kLeast_C) - kRounding && w <= relative(kMost_C) + kRounding)) {
    return fail(ErrorCode::bad_use,
                "a platinum thermometer of " + std::to_string(atZero.in(ohm)) + " ohm cannot have " +
                    std::to_string(r.in(ohm)) + " ohm between -200 and 850 degC",
                {}, "look for an open or shorted element, or for leads counted with it");
  }
  // The quadratic's root in the form that loses nothing near 0 degC; below, where a fourth power is missing,
  // it is within 3 K and the steps finish it.
  double t = 2 * (w - 1) / (kA + std::sqrt(kA * kA + 4 * kB * (w - 1)));
  if (w < 1) {
    for (int k = 0; k < 6; ++k) t -= (relative(t) - w) / slope(t);
  }
  return Temperature::celsius(t);
}

}  // namespace shuntwright::mechanics
