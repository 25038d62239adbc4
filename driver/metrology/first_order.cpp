#include "driver/metrology/first_order.h"

#include <algorithm>
#include <cmath>

namespace shuntwright::metrology {
namespace {

using Outputs = std::vector<double>;

/// The function at the means, moved by whole standard uncertainties in up to two inputs.
class Evaluator {
 public:
  explicit Evaluator(const Model& model) : model_(model) {
    for (const auto& in : model.inputs) x_.push_back(in.distribution.mean);
  }

  Result<Outputs> at(std::size_t i, int stepsOfI, std::size_t j, int stepsOfJ) {
    std::vector<double> x = x_;
    x[i] += stepsOfI * u(i);
    x[j] += stepsOfJ * u(j);
    return call(x);
  }
  Result<Outputs> at(std::size_t i, int steps) { return at(i, steps, i, 0); }
  Result<Outputs> atMeans() { return call(x_); }
  double u(std::size_t i) const { return model_.inputs[i].distribution.standardUncertainty; }

 private:
  Result<Outputs> call(const std::vector<double>& x) {
    Outputs y(model_.outputs);
    if (auto done = model_.function(x, y); !done) return std::unexpected(std::move(done.error()));
    return y;
  }

  const Model& model_;
  std::vector<double> x_;
};

/// Differences per standard uncertainty of every input, a row an output: f_i u_i.
struct Differences {
  Outputs values;
  Matrix first;                   ///< f_i u_i
  std::vector<Outputs> up, down;  ///< values one standard uncertainty up and down
};

Result<Differences> centralDifferences(Evaluator& function, const Model& model) {
  const std::size_t n = model.inputs.size();
  Differences d;
  auto values = function.atMeans();
  if (!values) return std::unexpected(std::move(values.error()));
  d.values = std::move(*values);
  d.first = Matrix(model.outputs, n);
  d.up.assign(n, d.values);
  d.down.assign(n, d.values);
  for (std::size_t i = 0; i < n; ++i) {
    if (function.u(i) == 0) continue;
    for (const int side : {1, -1}) {
      auto moved = function.at(i, side);
      if (!moved) {
        return std::unexpected(
            std::move(moved.error())
                .wrap("input \"" + model.inputs[i].quantity + "\" moved by its standard uncertainty"));
      }
      (side > 0 ? d.up : d.down)[i] = std::move(*moved);
    }
    for (std::size_t k = 0; k < model.outputs; ++k) d.first(k, i) = (d.up[i][k] - d.down[i][k]) / 2;
  }
  return d;
}

/// Variance of the second-order terms for each output. Takes the cubic part out of the first differences,
/// which would otherwise count it a second time.
Result<Outputs> secondOrder(Evaluator& function, const Model& model, Differences& d) {
  const std::size_t n = model.inputs.size();
  Outputs variance(model.outputs, 0.0);
  for (std::size_t i = 0; i < n; ++i) {
    if (function.u(i) == 0) continue;
    auto up = function.at(i, 2);
    if (!up) return std::unexpected(std::move(up.error()));
    auto down = function.at(i, -2);
    if (!down) return std::unexpected(std::move(down.error()));
    for (std::size_t k = 0; k < model.outputs; ++k) {
      const double second = d.up[i][k] - 2 * d.values[k] + d.down[i][k];
      const double third = ((*up)[k] - (*down)[k]) / 2 - (d.up[i][k] - d.down[i][k]);
      d.first(k, i) -= third / 6;
      variance[k] += second * second / 2 + d.first(k, i) * third;
    }
  }
  for (std::size_t i = 0; i < n; ++i) {
    for (std::size_t j = i + 1; j < n; ++j) {
      if (function.u(i) == 0 || function.u(j) == 0) continue;
      Outputs corner[2][2];
      for (const int a : {0, 1}) {
        for (const int b : {0, 1}) {
          auto value = function.at(i, a == 0 ? 1 : -1, j, b == 0 ? 1 : -1);
          if (!value) return std::unexpected(std::move(value.error()));
          corner[a][b] = std::move(*value);
        }
      }
      for (std::size_t k = 0; k < model.outputs; ++k) {
        const double pp = corner[0][0][k], pm = corner[0][1][k], mp = corner[1][0][k], mm = corner[1][1][k];
        const double mixed = (pp - pm - mp + mm) / 4;
        const double ijj = (pp + pm - mp - mm) / 2 - (d.up[i][k] - d.down[i][k]);
        const double jii = (pp + mp - pm - mm) / 2 - (d.up[j][k] - d.down[j][k]);
        variance[k] += mixed * mixed + d.first(k, i) * ijj + d.first(k, j) * jii;
      }
    }
  }
  return variance;
}

/// The variance that a group of inputs, correlated with each other, brings to an output.
double groupVariance(const std::vector<std::size_t>& group, const Matrix& r, const Matrix& first,
                     std::size_t output) {
  double variance = 0;
  for (const auto i : group) {
    for (const auto j : group) variance += first(output, i) * first(output, j) * r(i, j);
  }
  return std::max(0.0, variance);
}

double fewestDegrees(const std::vector<std::size_t>& group, const Model& model) {
  double nu = kInfinity;
  for (const auto i : group) nu = std::min(nu, model.inputs[i].distribution.degreesOfFreedom);
  return nu;
}

}  // namespace

double Estimate::coverageFactor(double probability) const {
  return studentFactor(degreesOfFreedom, probability);
}

double Estimate::expandedUncertainty(double probability) const {
  return coverageFactor(probability) * standardUncertainty;
}

Result<FirstOrderResult> firstOrder(const Model& model, const FirstOrderOptions& options) {
  if (auto sound = check(model); !sound) return std::unexpected(std::move(sound.error()));
  const std::size_t n = model.inputs.size();
  Evaluator function(model);
  Differences d;
  if (options.sensitivities) {
    if (options.sensitivities->rows != model.outputs || options.sensitivities->columns != n) {
      return fail(ErrorCode::bad_use, "the sensitivities given need a row an output and a column an input");
    }
    auto values = function.atMeans();
    if (!values) return std::unexpected(std::move(values.error()));
    d.values = std::move(*values);
    d.first = *options.sensitivities;
    for (std::size_t k = 0; k < model.outputs; ++k) {
      for (std::size_t i = 0; i < n; ++i) d.first(k, i) *= function.u(i);
    }
  }
  if (!options.sensitivities || options.secondOrder) {
    auto differences = centralDifferences(function, model);
    if (!differences) return std::unexpected(std::move(differences.error()));
    if (options.sensitivities) differences->first = d.first;
    d = std::move(*differences);
  }
  Outputs second(model.outputs, 0.0);
  if (options.secondOrder) {
    if (!model.correlations.empty()) {
      return fail(ErrorCode::bad_use, "second-order terms are known for independent inputs only", {},
                  "propagate by Monte Carlo");
    }
    const Matrix given = d.first;
    auto variance = secondOrder(function, model, d);
    if (!variance) return std::unexpected(std::move(variance.error()));
    second = std::move(*variance);
    if (options.sensitivities) d.first = given;
  }

  const Matrix r = correlationMatrix(model);
  const auto groups = correlatedGroups(model);
  FirstOrderResult result;
  result.covariance = Matrix(model.outputs, model.outputs);
  for (std::size_t k = 0; k < model.outputs; ++k) {
    for (std::size_t l = 0; l < model.outputs; ++l) {
      for (const auto& group : groups) {
        for (const auto i : group) {
          for (const auto j : group) result.covariance(k, l) += d.first(k, i) * d.first(l, j) * r(i, j);
        }
      }
    }
    result.covariance(k, k) = std::max(0.0, result.covariance(k, k) + second[k]);
    Estimate e;
    e.value = d.values[k];
    e.standardUncertainty = std::sqrt(result.covariance(k, k));
    e.secondOrderVariance = second[k];
    for (std::size_t i = 0; i < n; ++i) {
      const double u = function.u(i);
      const double measured = u > 0 ? d.first(k, i) / u : 0;
      e.contributions.push_back(
          {options.sensitivities ? (*options.sensitivities)(k, i) : measured, std::abs(d.first(k, i))});
    }
    std::vector<WeightedDegrees> weighted;
    for (const auto& group : groups) {
      weighted.push_back({std::sqrt(groupVariance(group, r, d.first, k)), fewestDegrees(group, model)});
    }
    if (second[k] > 0) weighted.push_back({std::sqrt(second[k]), kInfinity});
    e.degreesOfFreedom = effectiveDegrees(weighted);
    result.outputs.push_back(std::move(e));
  }
  return result;
}

double shapedHalfWidth(const Model& model, const Estimate& estimate, double probability) {
  const Matrix r = correlationMatrix(model);
  std::vector<Component> parts;
  for (const auto& group : correlatedGroups(model)) {
    if (group.size() == 1) {
      const auto i = group.front();
      parts.push_back({model.inputs[i].distribution.shape, estimate.contributions[i].uncertainty});
      continue;
    }
    Matrix first(1, model.inputs.size());
    for (const auto i : group) {
      first(0, i) = estimate.contributions[i].sensitivity * model.inputs[i].distribution.standardUncertainty;
    }
    parts.push_back({Shape::normal, std::sqrt(groupVariance(group, r, first, 0))});
  }
  if (estimate.secondOrderVariance > 0)
    parts.push_back({Shape::normal, std::sqrt(estimate.secondOrderVariance)});
  const double student = estimate.coverageFactor(probability) / studentFactor(kInfinity, probability);
  return coverageHalfWidth(parts, probability) * student;
}

}  // namespace shuntwright::metrology
