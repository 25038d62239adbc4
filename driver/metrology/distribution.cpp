#include "driver/metrology/distribution.h"

#include <boost/math/distributions/normal.hpp>
#include <cmath>
#include <numbers>

namespace shuntwright::metrology {
namespace {

/// Half-width over standard uncertainty of a bounded shape.
double widthFactor(Shape shape) {
  switch (shape) {
    case Shape::normal:
      return kInfinity;
    case Shape::rectangular:
      return std::numbers::sqrt3;
    case Shape::triangular:
      return std::sqrt(6.0);
    case Shape::arcsine:
      return std::numbers::sqrt2;
  }
  return kInfinity;
}

Distribution bounded(Shape shape, double mean, double halfWidth) {
  return {shape, mean, halfWidth / widthFactor(shape), kInfinity};
}

/// Gamma of shape a >= 1 and scale 1.
double drawGamma(double a, Random& random) {
  const double d = a - 1.0 / 3, c = 1 / std::sqrt(9 * d);
  for (;;) {
    const double x = random.normal();
    const double root = 1 + c * x;
    if (root <= 0) continue;
    const double v = root * root * root;
    if (std::log(1 - random.uniform()) < 0.5 * x * x + d - d * v + d * std::log(v)) return d * v;
  }
}

}  // namespace

const char* name(Shape shape) {
  switch (shape) {
    case Shape::normal:
      return "normal";
    case Shape::rectangular:
      return "rectangular";
    case Shape::triangular:
      return "triangular";
    case Shape::arcsine:
      return "U-shaped";
  }
  return "";
}

double Distribution::halfWidth() const {
  return standardUncertainty * widthFactor(shape);
}

double Distribution::draw(Random& random) const {
  if (standardUncertainty == 0) return mean;
  switch (shape) {
    case Shape::normal: {
      const double z = random.normal();
      if (!std::isfinite(degreesOfFreedom)) return mean + standardUncertainty * z;
      return mean +
             standardUncertainty * z * std::sqrt(degreesOfFreedom / drawChiSquared(degreesOfFreedom, random));
    }
    case Shape::rectangular: {
      double a = halfWidth();
      if (std::isfinite(degreesOfFreedom)) a *= 1 + random.uniform(-1, 1) / std::sqrt(2 * degreesOfFreedom);
      return mean + random.uniform(-a, a);
    }
    case Shape::triangular:
      return mean + 0.5 * halfWidth() * (random.uniform(-1, 1) + random.uniform(-1, 1));
    case Shape::arcsine:
      return mean + halfWidth() * std::sin(std::numbers::pi * random.uniform(-1, 1));
  }
  return mean;
}

Distribution normal(double mean, double standardUncertainty, double degreesOfFreedom) {
  return {Shape::normal, mean, standardUncertainty, degreesOfFreedom};
}

Distribution rectangular(double mean, double halfWidth, double degreesOfFreedom) {
  Distribution d = bounded(Shape::rectangular, mean, halfWidth);
  d.degreesOfFreedom = degreesOfFreedom;
  return d;
}

Distribution triangular(double mean, double halfWidth) {
  return bounded(Shape::triangular, mean, halfWidth);
}

Distribution arcsine(double mean, double halfWidth) {
  return bounded(Shape::arcsine, mean, halfWidth);
}

Result<Distribution> typeA(std::span<const double> readings) {
  if (readings.size() < 2) {
    return fail(ErrorCode::bad_use, "a type A evaluation needs at least two readings", {},
                "repeat the reading, or state its standard uncertainty");
  }
  const auto n = static_cast<double>(readings.size());
  double mean = 0, squares = 0;
  for (const double r : readings) mean += r / n;
  for (const double r : readings) squares += (r - mean) * (r - mean);
  return normal(mean, std::sqrt(squares / (n - 1) / n), n - 1);
}

double standardQuantile(Shape shape, double probability) {
  const double centred = 2 * probability - 1;
  switch (shape) {
    case Shape::normal:
      return boost::math::quantile(boost::math::normal(), probability);
    case Shape::rectangular:
      return widthFactor(shape) * centred;
    case Shape::triangular:
      return widthFactor(shape) * std::copysign(1 - std::sqrt(1 - std::abs(centred)), centred);
    case Shape::arcsine:
      return widthFactor(shape) * std::sin(std::numbers::pi / 2 * centred);
  }
  return 0;
}

double drawChiSquared(double degreesOfFreedom, Random& random) {
  const double a = degreesOfFreedom / 2;
  if (a >= 1) return 2 * drawGamma(a, random);
  return 2 * drawGamma(a + 1, random) * std::pow(1 - random.uniform(), 1 / a);
}

}  // namespace shuntwright::metrology
