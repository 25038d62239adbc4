#include "driver/metrology/coverage.h"

#include <algorithm>
#include <boost/math/distributions/normal.hpp>
#include <boost/math/distributions/students_t.hpp>
#include <cmath>
#include <numbers>
#include <vector>

namespace shuntwright::metrology {
namespace {

/// A distribution function on a regular grid, 0 to its left and 1 to its right.
class GridDistribution {
 public:
  GridDistribution(double limit, std::size_t points)
      : low_(-limit), step_(2 * limit / static_cast<double>(points - 1)), f_(points) {}

  double x(std::size_t i) const { return low_ + step_ * static_cast<double>(i); }

  template <class Function>
  void fill(Function&& function) {
    for (std::size_t i = 0; i < f_.size(); ++i) f_[i] = function(x(i));
  }

  /// Adds an independent rectangular contribution: F(x) becomes its mean over [x - a, x + a].
  void convolveRectangular(double a) {
    std::vector<double> integral(f_.size(), 0.0);
    for (std::size_t i = 1; i < f_.size(); ++i)
      integral[i] = integral[i - 1] + 0.5 * (f_[i - 1] + f_[i]) * step_;
    const auto at = [&](double where) {
      const double position = (where - low_) / step_;
      if (position <= 0) return 0.0;
      const double last = static_cast<double>(f_.size() - 1);
      if (position >= last) return integral.back() + (position - last) * step_;
      const auto i = static_cast<std::size_t>(position);
      const double t = position - static_cast<double>(i);
      // Exact integral of the linear piece.
      return integral[i] + step_ * (t * f_[i] + 0.5 * t * t * (f_[i + 1] - f_[i]));
    };
    std::vector<double> next(f_.size());
    for (std::size_t i = 0; i < f_.size(); ++i) next[i] = (at(x(i) + a) - at(x(i) - a)) / (2 * a);
    f_ = std::move(next);
  }

  /// Adds an independent U-shaped contribution: F(x) becomes its mean over x - a cos(angle).
  void convolveArcsine(double a) {
    constexpr int kAngles = 200;
    std::vector<double> next(f_.size(), 0.0);
    for (int k = 0; k < kAngles; ++k) {
      const double shift = a * std::cos(std::numbers::pi * (k + 0.5) / kAngles);
      for (std::size_t i = 0; i < f_.size(); ++i) next[i] += at(x(i) - shift) / kAngles;
    }
    f_ = std::move(next);
  }

  double at(double where) const {
    const double position = (where - low_) / step_;
    if (position <= 0) return 0;
    if (position >= static_cast<double>(f_.size() - 1)) return 1;
    const auto i = static_cast<std::size_t>(position);
    const double t = position - static_cast<double>(i);
    return f_[i] + t * (f_[i + 1] - f_[i]);
  }

 private:
  double low_, step_;
  std::vector<double> f_;
};

/// A bounded contribution that the grid resolves.
struct Bounded {
  Shape shape;
  double halfWidth;
  double variance() const { return halfWidth * halfWidth / (shape == Shape::arcsine ? 2 : 3); }
};

}  // namespace

double coverageHalfWidth(std::span<const Component> components, double probability) {
  double variance = 0;
  std::vector<Bounded> bounded;
  for (const auto& c : components) {
    if (c.standardUncertainty <= 0) continue;
    const double a = Distribution{c.shape, 0, c.standardUncertainty, kInfinity}.halfWidth();
    switch (c.shape) {
      case Shape::normal:
        variance += c.standardUncertainty * c.standardUncertainty;
        break;
      case Shape::triangular:
        bounded.insert(bounded.end(), 2, Bounded{Shape::rectangular, a / 2});
        break;
      default:
        bounded.push_back({c.shape, a});
    }
  }
  std::sort(bounded.begin(), bounded.end(),
            [](auto& one, auto& other) { return one.halfWidth > other.halfWidth; });
  constexpr std::size_t kPoints = 2001;
  const auto gridLimit = [&] {
    double sum = 6.5 * std::sqrt(variance);
    for (const auto& b : bounded) sum += b.halfWidth;
    return sum;
  };
  // Bounded contributions narrower than a few grid steps act as normal ones.
  while (!bounded.empty() && bounded.back().halfWidth < 4 * (2 * gridLimit() / kPoints) &&
         (bounded.size() > 1 || variance > 0)) {
    variance += bounded.back().variance();
    bounded.pop_back();
  }
  const double limit = gridLimit();
  if (limit == 0) return 0;
  GridDistribution distribution(limit, kPoints);
  std::size_t used = 0;
  const double sigma = std::sqrt(variance);
  if (sigma > 2 * (2 * limit / kPoints) || bounded.empty()) {
    distribution.fill([&](double v) { return 0.5 * std::erfc(-v / (sigma * std::numbers::sqrt2)); });
  } else {
    // What is left of the normal part is too narrow for the grid: it widens the widest contribution.
    const Bounded& widest = bounded.front();
    const double a = widest.halfWidth * std::sqrt(1 + variance / widest.variance());
    distribution.fill([&](double v) {
      const double t = std::clamp(v / a, -1.0, 1.0);
      return widest.shape == Shape::arcsine ? 0.5 + std::asin(t) / std::numbers::pi : 0.5 * (1 + t);
    });
    used = 1;
  }
  for (std::size_t i = used; i < bounded.size(); ++i) {
    const Bounded& b = bounded[i];
    if (b.shape == Shape::arcsine) {
      distribution.convolveArcsine(b.halfWidth);
    } else {
      distribution.convolveRectangular(b.halfWidth);
    }
  }

  double low = 0, high = limit;
  for (int i = 0; i < 60; ++i) {
    const double middle = 0.5 * (low + high);
    (distribution.at(middle) - distribution.at(-middle) < probability ? low : high) = middle;
  }
  return high;
}

double studentFactor(double degreesOfFreedom, double probability) {
  const double upper = 0.5 + probability / 2;
  if (!std::isfinite(degreesOfFreedom) || degreesOfFreedom > 1e6) {
    return boost::math::quantile(boost::math::normal(), upper);
  }
  return boost::math::quantile(boost::math::students_t(std::max(1.0, degreesOfFreedom)), upper);
}

double effectiveDegrees(std::span<const WeightedDegrees> contributions) {
  double variance = 0, sum = 0;
  for (const auto& c : contributions) {
    const double v = c.standardUncertainty * c.standardUncertainty;
    variance += v;
    if (std::isfinite(c.degreesOfFreedom) && c.degreesOfFreedom > 0) sum += v * v / c.degreesOfFreedom;
  }
  return sum > 0 ? variance * variance / sum : kInfinity;
}

}  // namespace shuntwright::metrology
