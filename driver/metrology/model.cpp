#include "driver/metrology/model.h"

#include <algorithm>
#include <cmath>
#include <Eigen/Eigenvalues>
#include <map>
#include <numeric>

namespace shuntwright::metrology {

Result<void> check(const Model& model) {
  if (!model.function || model.outputs == 0)
    return fail(ErrorCode::bad_use, "a model needs a function and an output");
  for (const auto& in : model.inputs) {
    const auto& d = in.distribution;
    if (!std::isfinite(d.mean) || !std::isfinite(d.standardUncertainty) || d.standardUncertainty < 0) {
      return fail(ErrorCode::bad_use,
                  "the value and standard uncertainty must be finite, the latter not negative",
                  "input \"" + in.quantity + "\"");
    }
    if (!(d.degreesOfFreedom > 0)) {
      return fail(ErrorCode::bad_use, "degrees of freedom must be above 0", "input \"" + in.quantity + "\"");
    }
  }
  for (const auto& c : model.correlations) {
    if (c.first >= model.inputs.size() || c.second >= model.inputs.size() || c.first == c.second ||
        !(std::abs(c.coefficient) <= 1)) {
      return fail(ErrorCode::bad_use,
                  "a correlation joins two different inputs with a coefficient from -1 to 1");
    }
  }
  if (model.correlations.empty()) return {};
  const Matrix r = correlationMatrix(model);
  const auto n = static_cast<Eigen::Index>(r.rows);
  const Eigen::Map<const Eigen::MatrixXd> symmetric(r.values.data(), n, n);
  const Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd> solver(symmetric, Eigen::EigenvaluesOnly);
  if (solver.eigenvalues().minCoeff() < -1e-9 * static_cast<double>(n)) {
    return fail(ErrorCode::bad_use, "the correlations contradict each other: no quantities can have them all",
                {}, "estimate them from readings taken together, or from what the quantities share");
  }
  return {};
}

Matrix correlationMatrix(const Model& model) {
  Matrix r(model.inputs.size(), model.inputs.size());
  for (std::size_t i = 0; i < r.rows; ++i) r(i, i) = 1;
  for (const auto& c : model.correlations) r(c.first, c.second) = r(c.second, c.first) = c.coefficient;
  return r;
}

std::vector<std::vector<std::size_t>> correlatedGroups(const Model& model) {
  std::vector<std::size_t> head(model.inputs.size());  // smallest index of the group
  std::iota(head.begin(), head.end(), std::size_t{0});
  for (const auto& c : model.correlations) {
    if (c.coefficient == 0) continue;
    const std::size_t low = std::min(head[c.first], head[c.second]),
                      high = std::max(head[c.first], head[c.second]);
    for (auto& h : head) {
      if (h == high) h = low;
    }
  }
  std::vector<std::vector<std::size_t>> groups;
  for (std::size_t i = 0; i < head.size(); ++i) {
    if (head[i] != i) continue;
    auto& group = groups.emplace_back();
    for (std::size_t k = i; k < head.size(); ++k) {
      if (head[k] == i) group.push_back(k);
    }
  }
  return groups;
}

Model join(std::vector<NamedModel> parts) {
  Model joint;
  joint.outputs = 0;
  std::map<std::string, std::size_t> shared;
  std::vector<std::vector<std::size_t>> places;  // of each part's inputs among the joint ones
  for (const auto& [name, model] : parts) {
    auto& own = places.emplace_back();
    for (Input in : model.inputs) {
      if (!in.source.empty()) {
        const auto [known, isNew] = shared.try_emplace(in.source, joint.inputs.size());
        own.push_back(known->second);
        if (!isNew) continue;
      } else {
        own.push_back(joint.inputs.size());
        in.quantity = name + ": " + in.quantity;
      }
      joint.inputs.push_back(std::move(in));
    }
    for (const auto& c : model.correlations) {
      joint.correlations.push_back({own[c.first], own[c.second], c.coefficient});
    }
    joint.outputs += model.outputs;
  }
  joint.function = [parts = std::move(parts), places = std::move(places)](
                       std::span<const double> x, std::span<double> y) -> Result<void> {
    std::vector<double> own;
    for (std::size_t p = 0; p < parts.size(); ++p) {
      own.clear();
      for (const auto place : places[p]) own.push_back(x[place]);
      const auto& model = parts[p].model;
      if (auto done = model.function(own, y.first(model.outputs)); !done) {
        return std::unexpected(std::move(done.error()).wrap(parts[p].name));
      }
      y = y.subspan(model.outputs);
    }
    return {};
  };
  return joint;
}

Result<void> addObservedTogether(Model& model, std::span<const ObservedQuantity> observed) {
  const std::size_t first = model.inputs.size();
  std::vector<Input> inputs;
  for (const auto& o : observed) {
    auto distribution = typeA(o.readings);
    if (!distribution)
      return std::unexpected(std::move(distribution.error()).wrap("input \"" + o.quantity + "\""));
    if (o.readings.size() != observed.front().readings.size()) {
      return fail(ErrorCode::bad_use, "readings taken together must be equally many",
                  "input \"" + o.quantity + "\"");
    }
    inputs.push_back({o.quantity, o.unit, *distribution});
  }
  model.inputs.insert(model.inputs.end(), inputs.begin(), inputs.end());
  for (std::size_t i = 0; i < observed.size(); ++i) {
    for (std::size_t j = i + 1; j < observed.size(); ++j) {
      const auto& a = observed[i].readings;
      const auto& b = observed[j].readings;
      const auto n = static_cast<double>(a.size());
      double covariance = 0;
      for (std::size_t k = 0; k < a.size(); ++k) {
        covariance +=
            (a[k] - inputs[i].distribution.mean) * (b[k] - inputs[j].distribution.mean) / (n - 1) / n;
      }
      const double product =
          inputs[i].distribution.standardUncertainty * inputs[j].distribution.standardUncertainty;
      if (product > 0) model.correlations.push_back({first + i, first + j, covariance / product});
    }
  }
  return {};
}

}  // namespace shuntwright::metrology
