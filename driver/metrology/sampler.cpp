#include "driver/metrology/sampler.h"

#include <algorithm>
#include <boost/math/distributions/students_t.hpp>
#include <cmath>
#include <Eigen/Eigenvalues>
#include <numbers>

namespace shuntwright::metrology {
namespace {

double normalShare(double z) {
  return 0.5 * std::erfc(-z / std::numbers::sqrt2);
}

/// A shape's value (mean 0, u 1) for a normal score.
double valueOfScore(Shape shape, double z) {
  return shape == Shape::normal ? z : standardQuantile(shape, std::clamp(normalShare(z), 0.0, 1.0));
}

/// Correlation of the values of two shapes whose normal scores have correlation rho: the double integral by
/// midpoints, which converge fast for integrands that die out at both ends.
double correlationOfValues(Shape a, Shape b, double rho) {
  constexpr int kPoints = 120;
  constexpr double kReach = 7, kStep = 2 * kReach / kPoints;
  const double rest = std::sqrt(std::max(0.0, 1 - rho * rho));
  double weights[kPoints], total = 0;
  for (int i = 0; i < kPoints; ++i) {
    const double z = -kReach + (i + 0.5) * kStep;
    weights[i] = std::exp(-0.5 * z * z);
    total += weights[i];
  }
  double sum = 0;
  for (int i = 0; i < kPoints; ++i) {
    const double zi = -kReach + (i + 0.5) * kStep;
    const double va = valueOfScore(a, zi) * weights[i];
    for (int j = 0; j < kPoints; ++j) {
      sum += va * weights[j] * valueOfScore(b, rho * zi + rest * (-kReach + (j + 0.5) * kStep));
    }
  }
  return sum / (total * total);
}

/// The correlation of the scores that gives the values correlation r: secant steps, the relation being nearly
/// straight.
Result<double> correlationOfScores(Shape a, Shape b, double r) {
  if (a == b && (a == Shape::normal || std::abs(r) == 1)) return r;
  const double most = correlationOfValues(a, b, 1);
  if (std::abs(r) > most) {
    return fail(ErrorCode::bad_use, std::string("a ") + name(a) + " and a " + name(b) +
                                        " quantity cannot be correlated more strongly than " +
                                        std::to_string(most));
  }
  double low = 0, high = std::copysign(1.0, r), atLow = 0, atHigh = std::copysign(most, r);
  double x = r;
  for (int i = 0; i < 30; ++i) {
    const double miss = correlationOfValues(a, b, x) - r;
    if (std::abs(miss) < 1e-9) break;
    if ((miss > 0) == (r > 0)) {
      high = x;
      atHigh = miss + r;
    } else {
      low = x;
      atLow = miss + r;
    }
    x = low + (high - low) * (r - atLow) / (atHigh - atLow);
  }
  return x;
}

/// A root of a correlation matrix that may be singular (fully correlated inputs); rows have length 1.
Matrix rootOf(const Matrix& correlation) {
  const auto n = static_cast<Eigen::Index>(correlation.rows);
  const Eigen::Map<const Eigen::MatrixXd> symmetric(correlation.values.data(), n, n);
  const Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd> solver(symmetric);
  const Eigen::VectorXd roots = solver.eigenvalues().cwiseMax(0).cwiseSqrt();
  Eigen::MatrixXd root = solver.eigenvectors() * roots.asDiagonal();
  root.rowwise().normalize();
  Matrix out(correlation.rows, correlation.rows);
  for (Eigen::Index i = 0; i < n; ++i) {
    for (Eigen::Index j = 0; j < n; ++j)
      out(static_cast<std::size_t>(i), static_cast<std::size_t>(j)) = root(i, j);
  }
  return out;
}

}  // namespace

Result<Sampler> Sampler::of(const Model& model) {
  if (auto sound = check(model); !sound) return std::unexpected(std::move(sound.error()));
  Sampler sampler;
  for (const auto& in : model.inputs) sampler.distributions_.push_back(in.distribution);
  const Matrix correlation = correlationMatrix(model);
  for (auto& members : correlatedGroups(model)) {
    Group group;
    group.members = std::move(members);
    const std::size_t n = group.members.size();
    if (n > 1) {
      const auto& first = sampler.distributions_[group.members.front()];
      const bool alike = std::ranges::all_of(group.members, [&](std::size_t i) {
        const auto& d = sampler.distributions_[i];
        return d.shape == Shape::normal && d.degreesOfFreedom == first.degreesOfFreedom;
      });
      if (alike && std::isfinite(first.degreesOfFreedom)) group.sharedDegrees = first.degreesOfFreedom;
      Matrix scores(n, n);
      for (std::size_t i = 0; i < n; ++i) {
        scores(i, i) = 1;
        for (std::size_t j = 0; j < i; ++j) {
          const std::size_t a = group.members[i], b = group.members[j];
          auto rho = correlationOfScores(sampler.distributions_[a].shape, sampler.distributions_[b].shape,
                                         correlation(a, b));
          if (!rho) {
            return std::unexpected(std::move(rho.error())
                                       .wrap("inputs \"" + model.inputs[a].quantity + "\" and \"" +
                                             model.inputs[b].quantity + "\""));
          }
          scores(i, j) = scores(j, i) = *rho;
        }
      }
      group.root = rootOf(scores);
    }
    sampler.groups_.push_back(std::move(group));
  }
  return sampler;
}

void Sampler::draw(Random& random, std::span<double> x) const {
  for (const auto& group : groups_) {
    if (group.members.size() == 1) {
      const auto i = group.members.front();
      x[i] = distributions_[i].draw(random);
    } else {
      drawTogether(group, random, x);
    }
  }
}

void Sampler::drawTogether(const Group& group, Random& random, std::span<double> x) const {
  const std::size_t n = group.members.size();
  std::vector<double> independent(n);
  for (auto& z : independent) z = random.normal();
  const double stretch = group.sharedDegrees > 0
                             ? std::sqrt(group.sharedDegrees / drawChiSquared(group.sharedDegrees, random))
                             : 1;
  for (std::size_t k = 0; k < n; ++k) {
    const Distribution& d = distributions_[group.members[k]];
    double score = 0;
    for (std::size_t j = 0; j < n; ++j) score += group.root(k, j) * independent[j];
    double value = valueOfScore(d.shape, score) * stretch;
    if (group.sharedDegrees == 0 && std::isfinite(d.degreesOfFreedom)) {
      if (d.shape == Shape::normal) {
        const double share = std::clamp(normalShare(score), 1e-300, 1 - 1e-16);
        value = boost::math::quantile(boost::math::students_t(d.degreesOfFreedom), share);
      } else if (d.shape == Shape::rectangular) {
        value *= 1 + random.uniform(-1, 1) / std::sqrt(2 * d.degreesOfFreedom);
      }
    }
    x[group.members[k]] = d.mean + d.standardUncertainty * value;
  }
}

}  // namespace shuntwright::metrology
