#pragma once

#include <functional>
#include <span>
#include <string>
#include <vector>

#include "driver/core/error.h"
#include "driver/metrology/distribution.h"
#include "driver/metrology/matrix.h"

namespace shuntwright::metrology {

/// One input quantity; its distribution is in `unit`.
struct Input {
  std::string quantity;
  std::string unit;
  Distribution distribution;
  /// What it is a property of, where several measurements may share it ("resistor RC1"); else empty.
  std::string source = {};
};

/// Correlation coefficient, -1..1, of two inputs (indices into Model::inputs).
struct Correlation {
  std::size_t first = 0, second = 0;
  double coefficient = 0;
};

/// The outputs for one value of every input: reads x (as many as inputs), fills y (as many as outputs). Pure.
using Function = std::function<Result<void>(std::span<const double> x, std::span<double> y)>;

/// A measurement: what goes in, what comes out and how. The same model is propagated to first order
/// (first_order.h) and by Monte Carlo (monte_carlo.h).
struct Model {
  std::vector<Input> inputs;
  std::vector<Correlation> correlations;  ///< pairs that are not named are independent
  std::size_t outputs = 1;
  Function function;
};

/// Errors: bad_use when an index, a correlation or an uncertainty makes no sense, or when no set of
/// quantities can be correlated as stated.
Result<void> check(const Model& model);

/// Correlation coefficients of all inputs; 1 on the diagonal.
Matrix correlationMatrix(const Model& model);

/// Inputs joined by correlations, directly or through others; those that stand alone are groups of one.
std::vector<std::vector<std::size_t>> correlatedGroups(const Model& model);

/// Several measurements as one (JCGM 102): their outputs one after the other, their inputs together, where
/// inputs of one source are one quantity. That is how results that share a resistor come to be correlated.
/// The other inputs are told apart by the measurement's name.
struct NamedModel {
  std::string name;
  Model model;
};
Model join(std::vector<NamedModel> parts);

/// Type A inputs from readings taken together (one list a quantity, equally long), with the correlations of
/// their means (GUM 5.2.3, equation 17). Appended to `model`.
/// Errors: bad_use for fewer than two readings or lists of different length.
struct ObservedQuantity {
  std::string quantity, unit;
  std::vector<double> readings;
};
Result<void> addObservedTogether(Model& model, std::span<const ObservedQuantity> observed);

}  // namespace shuntwright::metrology
