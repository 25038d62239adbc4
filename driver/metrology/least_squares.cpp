#include "driver/metrology/least_squares.h"

#include <boost/math/distributions/chi_squared.hpp>
#include <boost/math/distributions/fisher_f.hpp>
#include <cmath>
#include <Eigen/Cholesky>
#include <Eigen/QR>
#include <map>

namespace shuntwright::metrology {
namespace {

// The digits that a steep polynomial costs are paid from those beyond double.
using Wide = Eigen::Matrix<long double, Eigen::Dynamic, Eigen::Dynamic>;
using WideVector = Eigen::Matrix<long double, Eigen::Dynamic, 1>;

/// Pivots below this share of the largest count as nothing: the readings are not better than that.
constexpr long double kRankThreshold = 1e-13L;

Wide wide(const Matrix& m) {
  Wide out(static_cast<Eigen::Index>(m.rows), static_cast<Eigen::Index>(m.columns));
  for (std::size_t i = 0; i < m.rows; ++i) {
    for (std::size_t j = 0; j < m.columns; ++j) {
      out(static_cast<Eigen::Index>(i), static_cast<Eigen::Index>(j)) = m(i, j);
    }
  }
  return out;
}

/// Brings design and observations to errors that are independent and of size 1.
Result<void> whiten(Wide& design, WideVector& observed, const ObservationErrors& errors) {
  const auto n = static_cast<std::size_t>(observed.size());
  if (errors.covariance) {
    if (errors.covariance->rows != n || errors.covariance->columns != n) {
      return fail(ErrorCode::bad_use, "the covariance of the observations needs a row and a column for each");
    }
    const Eigen::LLT<Wide> factor(wide(*errors.covariance));
    if (factor.info() != Eigen::Success) {
      return fail(ErrorCode::bad_use, "the covariance of the observations is not positive definite", {},
                  "an observation that follows exactly from others must be left out");
    }
    factor.matrixL().solveInPlace(design);
    factor.matrixL().solveInPlace(observed);
  } else if (!errors.uncertainties.empty()) {
    if (errors.uncertainties.size() != n) {
      return fail(ErrorCode::bad_use, "there must be one uncertainty for each observation");
    }
    for (std::size_t i = 0; i < n; ++i) {
      const double u = errors.uncertainties[i];
      if (!(u > 0)) {
        return fail(ErrorCode::bad_use, "the uncertainty of an observation must be above 0",
                    "observation " + std::to_string(i + 1));
      }
      design.row(static_cast<Eigen::Index>(i)) /= u;
      observed(static_cast<Eigen::Index>(i)) /= u;
    }
  }
  return {};
}

std::vector<double> narrow(const WideVector& v) {
  std::vector<double> out;
  for (const long double x : v) out.push_back(static_cast<double>(x));
  return out;
}

}  // namespace

Matrix throughOrigin(std::span<const double> x) {
  Matrix design(x.size(), 1);
  design.values.assign(x.begin(), x.end());
  return design;
}

Matrix straightLine(std::span<const double> x) {
  return polynomial(x, 1);
}

Matrix polynomial(std::span<const double> x, std::size_t degree) {
  Matrix design(x.size(), degree + 1);
  for (std::size_t i = 0; i < x.size(); ++i) {
    double power = 1;
    for (std::size_t k = 0; k <= degree; ++k, power *= x[i]) design(i, k) = power;
  }
  return design;
}

double Fit::residualDeviation() const {
  return degreesOfFreedom > 0 ? std::sqrt(chiSquared / static_cast<double>(degreesOfFreedom)) : 0;
}

double Fit::standardUncertainty(std::size_t parameter) const {
  return std::sqrt(covariance(parameter, parameter));
}

double Fit::correlation(std::size_t i, std::size_t j) const {
  const double product = standardUncertainty(i) * standardUncertainty(j);
  return product > 0 ? covariance(i, j) / product : 0;
}

FittedValue Fit::at(std::span<const double> designRow) const {
  FittedValue out;
  double variance = 0;
  for (std::size_t i = 0; i < parameters.size(); ++i) {
    out.value += parameters[i] * designRow[i];
    for (std::size_t j = 0; j < parameters.size(); ++j)
      variance += designRow[i] * covariance(i, j) * designRow[j];
  }
  out.standardUncertainty = std::sqrt(std::max(0.0, variance));
  return out;
}

Result<Fit> fitLinear(const Matrix& design, std::span<const double> observed,
                      const ObservationErrors& errors) {
  const std::size_t n = design.rows, p = design.columns;
  if (observed.size() != n || p == 0)
    return fail(ErrorCode::bad_use, "the design needs a row for each observation");
  if (n < p) {
    return fail(ErrorCode::bad_use,
                std::to_string(n) + " observations cannot give " + std::to_string(p) + " parameters");
  }
  const Wide plain = wide(design);
  Wide scaled = plain;
  WideVector y(static_cast<Eigen::Index>(n));
  for (std::size_t i = 0; i < n; ++i) y(static_cast<Eigen::Index>(i)) = observed[i];
  const WideVector plainY = y;
  if (auto done = whiten(scaled, y, errors); !done) return std::unexpected(std::move(done.error()));
  const WideVector norms = scaled.colwise().norm();
  for (Eigen::Index k = 0; k < norms.size(); ++k) {
    if (norms(k) > 0) scaled.col(k) /= norms(k);
  }
  Eigen::ColPivHouseholderQR<Wide> factors(scaled);
  factors.setThreshold(kRankThreshold);
  if (factors.rank() < static_cast<Eigen::Index>(p)) {
    return fail(ErrorCode::bad_use, "the observations cannot tell the parameters apart", {},
                "take observations that differ more, or fit fewer parameters");
  }
  const WideVector solution = factors.solve(y);
  const WideVector parameters = solution.cwiseQuotient(norms);
  Fit fit;
  fit.parameters = narrow(parameters);
  fit.fitted = narrow(plain * parameters);
  fit.residuals = narrow(plainY - plain * parameters);
  fit.chiSquared = static_cast<double>((y - scaled * solution).squaredNorm());
  fit.degreesOfFreedom = n - p;

  const bool unknown = errors.uncertainties.empty() && !errors.covariance;
  const double scale = unknown || errors.scaledByResiduals ? std::pow(fit.residualDeviation(), 2) : 1;
  const Wide r = factors.matrixR().topLeftCorner(static_cast<Eigen::Index>(p), static_cast<Eigen::Index>(p));
  const Wide unit = Wide::Identity(static_cast<Eigen::Index>(p), static_cast<Eigen::Index>(p));
  const Wide inverse = factors.colsPermutation() * r.triangularView<Eigen::Upper>().solve(unit);
  const Wide product = inverse * inverse.transpose();
  fit.covariance = Matrix(p, p);
  for (Eigen::Index i = 0; i < product.rows(); ++i) {
    for (Eigen::Index j = 0; j < product.cols(); ++j) {
      fit.covariance(static_cast<std::size_t>(i), static_cast<std::size_t>(j)) =
          scale * static_cast<double>(product(i, j) / (norms(i) * norms(j)));
    }
  }
  return fit;
}

LackOfFit lackOfFit(const Fit& fit) {
  LackOfFit test;
  test.statistic = fit.chiSquared;
  test.degrees = static_cast<double>(fit.degreesOfFreedom);
  if (test.degrees > 0) {
    const boost::math::chi_squared chance(test.degrees);
    test.probability = boost::math::cdf(boost::math::complement(chance, test.statistic));
  }
  return test;
}

Result<LackOfFit> lackOfFitFromRepeats(const Matrix& design, std::span<const double> observed) {
  auto fit = fitLinear(design, observed);
  if (!fit) return std::unexpected(std::move(fit.error()));
  std::map<std::vector<double>, std::vector<double>> repeats;  // design row -> observations
  for (std::size_t i = 0; i < design.rows; ++i) {
    const auto row = design.values.begin() + static_cast<std::ptrdiff_t>(i * design.columns);
    repeats[{row, row + static_cast<std::ptrdiff_t>(design.columns)}].push_back(observed[i]);
  }
  double pure = 0;
  for (const auto& [row, values] : repeats) {
    double mean = 0;
    for (const double v : values) mean += v / static_cast<double>(values.size());
    for (const double v : values) pure += (v - mean) * (v - mean);
  }
  LackOfFit test;
  test.degrees = static_cast<double>(repeats.size()) - static_cast<double>(design.columns);
  test.errorDegrees = static_cast<double>(observed.size() - repeats.size());
  if (test.degrees <= 0 || test.errorDegrees <= 0) {
    return fail(ErrorCode::bad_use,
                "lack of fit shows only with repeats, and with more settings than parameters", {},
                "repeat the observations, or state their uncertainty and test against that");
  }
  const double lack = std::max(0.0, fit->chiSquared - pure) / test.degrees;
  const double scatter = pure / test.errorDegrees;
  test.statistic = lack == 0 ? 0 : lack / scatter;
  const boost::math::fisher_f chance(test.degrees, test.errorDegrees);
  test.probability =
      std::isfinite(test.statistic) ? boost::math::cdf(boost::math::complement(chance, test.statistic)) : 0;
  return test;
}

}  // namespace shuntwright::metrology
