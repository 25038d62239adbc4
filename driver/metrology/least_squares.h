#pragma once

#include <optional>
#include <span>
#include <vector>

#include "driver/core/error.h"
#include "driver/metrology/distribution.h"
#include "driver/metrology/matrix.h"

namespace shuntwright::metrology {

/// Design matrices: a row an observation, a column a parameter.
Matrix throughOrigin(std::span<const double> x);                   ///< y = b x
Matrix straightLine(std::span<const double> x);                    ///< y = b0 + b1 x
Matrix polynomial(std::span<const double> x, std::size_t degree);  ///< y = b0 + b1 x + ... + bn x^n

/// What is known of the observations' errors.
struct ObservationErrors {
  std::vector<double> uncertainties;  ///< standard, one an observation; empty: all alike, of unknown size
  std::optional<Matrix> covariance;   ///< of all observations, instead of `uncertainties`
  /// Only the proportions count: the parameters' covariance is scaled by what the residuals show. Always so
  /// where nothing is given.
  bool scaledByResiduals = false;
};

/// A value of the fitted function with its standard uncertainty.
struct FittedValue {
  double value = 0, standardUncertainty = 0;
};

struct Fit {
  std::vector<double> parameters;
  Matrix covariance;                 ///< of the parameters
  std::vector<double> fitted;        ///< at the observations
  std::vector<double> residuals;     ///< observed - fitted
  double chiSquared = 0;             ///< weighted sum of squared residuals
  std::size_t degreesOfFreedom = 0;  ///< observations - parameters

  double residualDeviation() const;  ///< sqrt(chiSquared / degrees); 0 for no degrees of freedom
  double standardUncertainty(std::size_t parameter) const;
  double correlation(std::size_t i, std::size_t j) const;
  FittedValue at(std::span<const double> designRow) const;
};

/// Weighted (with a covariance: generalised) linear least squares, by orthogonal factors of the scaled design
/// in long double. Errors: bad_use when sizes differ, there are fewer observations than parameters, an
/// uncertainty is not above 0, a covariance is not positive definite, or the observations cannot tell the
/// parameters apart.
Result<Fit> fitLinear(const Matrix& design, std::span<const double> observed,
                      const ObservationErrors& errors = {});

/// Does the function describe the observations?
struct LackOfFit {
  double statistic = 0;
  double degrees = 0;               ///< of the numerator
  double errorDegrees = kInfinity;  ///< of the pure error; infinite for chi-square
  double probability = 1;           ///< of a statistic this large or larger if the function is right
};

/// Chi-square test against the stated uncertainties. Means something only if those were given and trusted.
LackOfFit lackOfFit(const Fit& fit);

/// F test against the scatter of repeats: observations with equal rows of the design are repeats.
/// Errors: as fitLinear(); bad_use when there are no repeats, or no more different rows than parameters.
Result<LackOfFit> lackOfFitFromRepeats(const Matrix& design, std::span<const double> observed);

}  // namespace shuntwright::metrology
