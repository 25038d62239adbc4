#pragma once

#include <optional>
#include <vector>

#include "driver/metrology/coverage.h"
#include "driver/metrology/model.h"

namespace shuntwright::metrology {

/// What one input does to one output.
struct Contribution {
  double sensitivity = 0;  ///< output's unit per input's unit
  double uncertainty = 0;  ///< |sensitivity| x standard uncertainty, in the output's unit
};

/// One output as the GUM states it.
struct Estimate {
  double value = 0;
  double standardUncertainty = 0;           ///< combined, correlations and second-order terms included
  double degreesOfFreedom = kInfinity;      ///< effective (Welch-Satterthwaite)
  double secondOrderVariance = 0;           ///< part of standardUncertainty^2; 0 unless asked for
  std::vector<Contribution> contributions;  ///< as Model::inputs

  double coverageFactor(double probability = kCoverage) const;  ///< Student's, GUM G.3
  double expandedUncertainty(
      double probability = kCoverage) const;  ///< coverage factor x combined uncertainty
};

struct FirstOrderResult {
  std::vector<Estimate> outputs;
  Matrix covariance;  ///< of the outputs (GUM H.2.3, JCGM 102)
};

struct FirstOrderOptions {
  /// Exact sensitivities, a row an output. Without them: central differences at one standard uncertainty
  /// (GUM 5.1.3, note 2), or of a tenth where second-order terms are wanted.
  std::optional<Matrix> sensitivities;
  /// Adds the terms of GUM 5.1.2, note: sum over i, j of (f_ij^2 / 2 + f_i f_ijj) u_i^2 u_j^2. They hold for
  /// independent inputs, and where i = j for normal ones.
  bool secondOrder = false;
};

/// Law of propagation of uncertainty (GUM 5.1.2, 5.2.2). Inputs that are correlated with each other count in
/// Welch-Satterthwaite as one contribution with their common (else the fewest) degrees of freedom.
/// Errors: as check(); bad_use for second-order terms of correlated inputs; any error of the function.
Result<FirstOrderResult> firstOrder(const Model& model, const FirstOrderOptions& options = {});

/// Half-width of the symmetric interval for one output of the linear model: the inputs' own shapes convolved
/// (coverageHalfWidth), times Student's factor for the effective degrees over that for infinitely many.
/// Inputs that are correlated with each other are taken together as one normal contribution.
double shapedHalfWidth(const Model& model, const Estimate& estimate, double probability = kCoverage);

}  // namespace shuntwright::metrology
