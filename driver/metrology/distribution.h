#pragma once

#include <limits>
#include <span>

#include "driver/core/error.h"
#include "driver/core/random.h"

namespace shuntwright::metrology {

inline constexpr double kInfinity = std::numeric_limits<double>::infinity();

enum class Shape { normal, rectangular, triangular, arcsine };
const char* name(Shape shape);  ///< "normal", "rectangular", "triangular", "U-shaped"

/// What is known of one quantity: centre, standard uncertainty (both in the quantity's unit), shape, and how
/// well the standard uncertainty itself is known.
struct Distribution {
  Shape shape = Shape::normal;
  double mean = 0;
  double standardUncertainty = 0;
  /// nu. For type B figures 1/2 (relative uncertainty of u)^-2 (GUM G.4.2).
  double degreesOfFreedom = kInfinity;

  /// Half the distance between the limits of a bounded shape; infinite for a normal one.
  double halfWidth() const;

  /// One value by chance. With finite nu a normal shape is drawn as a scaled and shifted t (JCGM 101, 6.4.9),
  /// a rectangular one with limits inexact by halfWidth / sqrt(2 nu) (curvilinear trapezoid, 6.4.3).
  double draw(Random& random) const;
};

Distribution normal(double mean, double standardUncertainty, double degreesOfFreedom = kInfinity);
Distribution rectangular(double mean, double halfWidth,
                         double degreesOfFreedom = kInfinity);  ///< u = a/sqrt(3)
Distribution triangular(double mean, double halfWidth);         ///< u = a/sqrt(6)
Distribution arcsine(double mean, double halfWidth);            ///< u = a/sqrt(2)

/// Type A: mean of n readings, s/sqrt(n), n - 1 degrees of freedom (GUM 4.2).
/// Errors: bad_use for less than two readings.
Result<Distribution> typeA(std::span<const double> readings);

/// Value below which the share `probability` (0..1) of the shape lies, for mean 0 and standard uncertainty 1.
double standardQuantile(Shape shape, double probability);

/// Chi-square with any nu > 0 (gamma variates after Marsaglia and Tsang, 2000).
double drawChiSquared(double degreesOfFreedom, Random& random);

}  // namespace shuntwright::metrology
