#pragma once

#include <span>

#include "driver/metrology/distribution.h"

namespace shuntwright::metrology {

/// The coverage probability that is stated unless another is asked for.
inline constexpr double kCoverage = 0.9545;

/// One contribution to a sum: its standard uncertainty (any unit, the same for all) and its shape.
struct Component {
  Shape shape = Shape::normal;
  double standardUncertainty = 0;
};

/// Half-width of the symmetric interval that holds `probability` of a sum of independent, centred
/// contributions. The distribution function is convolved numerically (JCGM 101 case of a linear model,
/// without drawing random numbers), so that a budget with one dominant rectangular input is not given the
/// factor 2 of a normal one. Accurate to 1e-3 of itself. 0 for no contributions.
double coverageHalfWidth(std::span<const Component> components, double probability = kCoverage);

/// Student's factor for two-sided `probability` and effective degrees of freedom (>= 1, infinity allowed).
double studentFactor(double degreesOfFreedom, double probability = kCoverage);

/// Welch-Satterthwaite, GUM G.4.1: nu_eff = u^4 / sum(u_i^4 / nu_i). Infinity when all are.
struct WeightedDegrees {
  double standardUncertainty = 0;
  double degreesOfFreedom = 0;
};
double effectiveDegrees(std::span<const WeightedDegrees> contributions);

}  // namespace shuntwright::metrology
