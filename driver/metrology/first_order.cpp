#include "driver/metrology/first_order.h"

#include <algorithm>
#include <cmath>

namespace shuntwright::metrology {
namespace {

using Outputs = std::vector<double>;

/// The function at the means, moved by so many standard uncertainties in up to two inputs.
class Evaluator {
 public:
  explicit Evaluator(const Model& model) : model_(model) {
    for (const auto& in : model.inputs) x_.push_back(in.distribution.mean);
  }

  Result<Outputs> at(std::size_t i, double stepsOfI, std::size_t j, double stepsOfJ) {
    std::vector<double> x = x_;
    x[i] += stepsOfI * u(i);
    x[j] += stepsOfJ * u(j);
    return call(x);
  }
  Result<Outputs> at(std::size_t i, double steps) { return at(i, steps, i, 0); }
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

Error at(Error error, const Model& model, std::size_t input) {
  return std::move(error).wrap("input \"" + model.inputs[input].quantity + "\" moved about its value");
}

/// f_i u_i, a row an output: central differences at one standard uncertainty.
Result<Matrix> centralDifferences(Evaluator& function, const Model& model) {
  Matrix first(model.outputs, model.inputs.size());
  for (std::size_t i = 0; i < first.columns; ++i) {
    if (function.u(i) == 0) continue;
    auto up = function.at(i, 1);
    if (!up) return std::unexpected(at(std::move(up.error()), model, i));
    auto down = function.at(i, -1);
    if (!down) return std::unexpected(at(std::move(down.error()), model, i));
    for (std::size_t k = 0; k < first.rows; ++k) first(k, i) = ((*up)[k] - (*down)[k]) / 2;
  }
  return first;
}

/// First derivatives as f_i u_i, free of the cubic part, and the variance of the second-order terms.
struct SecondOrder {
  Matrix first;
  Outputs variance;
};

/// Derivatives of second and third order from differences at a tenth of the standard uncertainties: a whole
/// one is too coarse for them, and far less loses digits.
Result<SecondOrder> secondOrder(Evaluator& function, const Model& model, const Outputs& values) {
  constexpr double h = 0.1;
  const std::size_t n = model.inputs.size();
  SecondOrder d{Matrix(model.outputs, n), Outputs(model.outputs, 0.0)};
  std::vector<Outputs> up(n, values), down(n, values);
  for (std::size_t i = 0; i < n; ++i) {
    if (function.u(i) == 0) continue;
    Outputs moved[4];
    const double steps[] = {2 * h, h, -h, -2 * h};
    for (std::size_t s = 0; s < 4; ++s) {
      auto value = function.at(i, steps[s]);
      if (!value) return std::unexpected(at(std::move(value.error()), model, i));
      moved[s] = std::move(*value);
    }
    for (std::size_t k = 0; k < model.outputs; ++k) {
      const double wide = moved[0][k] - moved[3][k], narrow = moved[1][k] - moved[2][k];
      d.first(k, i) = (8 * narrow - wide) / (12 * h);
      const double second = (moved[1][k] - 2 * values[k] + moved[2][k]) / (h * h);
      const double third = (wide / 2 - narrow) / (h * h * h);
      d.variance[k] += second * second / 2 + d.first(k, i) * third;
    }
    up[i] = std::move(moved[1]);
    down[i] = std::move(moved[2]);
  }
  for (std::size_t i = 0; i < n; ++i) {
    for (std::size_t j = i + 1; j < n; ++j) {
      if (function.u(i) == 0 || function.u(j) == 0) continue;
      Outputs corner[2][2];
      for (const int a : {0, 1}) {
        for (const int b : {0, 1}) {
          auto value = function.at(i, a == 0 ? h : -h, j, b == 0 ? h : -h);
          if (!value) return std::unexpected(at(std::move(value.error()), model, i));
          corner[a][b] = std::move(*value);
        }
      }
      for (std::size_t k = 0; k < model.outputs; ++k) {
        const double pp = corner[0][0][k], pm = corner[0][1][k], mp = corner[1][0][k], mm = corner[1][1][k];
        const double mixed = (pp - pm - mp + mm) / (4 * h * h);
        const double ijj = ((pp + pm - mp - mm) / 2 - (up[i][k] - down[i][k])) / (h * h * h);
        const double jii = ((pp + mp - pm - mm) / 2 - (up[j][k] - down[j][k])) / (h * h * h);
        d.variance[k] += mixed * mixed + d.first(k, i) * ijj + d.first(k, j) * jii;
      }
    }
  }
  return d;
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
  const auto& given = options.sensitivities;
  if (given && (given->rows != model.outputs || given->columns != n)) {
    return fail(ErrorCode::bad_use, "the sensitivities given need a row an output and a column an input");
  }
  if (options.secondOrder && !model.correlations.empty()) {
    return fail(ErrorCode::bad_use, "second-order terms are known for independent inputs only", {},
                "propagate by Monte Carlo");
  }
  Evaluator function(model);
  auto values = function.atMeans();
  if (!values) return std::unexpected(std::move(values.error()));
  Matrix first;  // f_i u_i
  Outputs second(model.outputs, 0.0);
  if (options.secondOrder) {
    auto terms = secondOrder(function, model, *values);
    if (!terms) return std::unexpected(std::move(terms.error()));
    first = std::move(terms->first);
    second = std::move(terms->variance);
  } else if (!given) {
    auto differences = centralDifferences(function, model);
    if (!differences) return std::unexpected(std::move(differences.error()));
    first = std::move(*differences);
  }
  if (given) {
    first = *given;
    for (std::size_t k = 0; k < model.outputs; ++k) {
      for (std::size_t i = 0; i < n; ++i) first(k, i) *= function.u(i);
    }
  }

  const Matrix r = correlationMatrix(model);
  const auto groups = correlatedGroups(model);
  FirstOrderResult result;
  result.covariance = Matrix(model.outputs, model.outputs);
  for (std::size_t k = 0; k < model.outputs; ++k) {
    for (std::size_t l = 0; l < model.outputs; ++l) {
      for (const auto& group : groups) {
        for (const auto i : group) {
          for (const auto j : group) result.covariance(k, l) += first(k, i) * first(l, j) * r(i, j);
        }
      }
    }
    result.covariance(k, k) = std::max(0.0, result.covariance(k, k) + second[k]);
    Estimate e;
    e.value = (*values)[k];
    e.standardUncertainty = std::sqrt(result.covariance(k, k));
    e.secondOrderVariance = second[k];
    for (std::size_t i = 0; i < n; ++i) {
      const double u = function.u(i);
      const double measured = u > 0 ? first(k, i) / u : 0;
      e.contributions.push_back({given ? (*given)(k, i) : measured, std::abs(first(k, i))});
    }
    std::vector<WeightedDegrees> weighted;
    for (const auto& group : groups) {
      weighted.push_back({std::sqrt(groupVariance(group, r, first, k)), fewestDegrees(group, model)});
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
