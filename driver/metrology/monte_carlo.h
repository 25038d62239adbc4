#pragma once

#include <cstddef>
#include <span>
#include <vector>

#include "driver/core/random.h"
#include "driver/metrology/coverage.h"
#include "driver/metrology/model.h"

namespace shuntwright::metrology {

struct Interval {
  double low = 0, high = 0;
  double width() const { return high - low; }
};

/// Both kinds of coverage interval of sorted values (JCGM 101 7.7): as much probability on either side, and
/// the shortest. At least two values.
struct CoverageIntervals {
  Interval symmetric, shortest;
};
CoverageIntervals coverageIntervals(std::span<const double> sorted, double probability);

/// Half of the last place of u written with so many significant digits, in u's unit (JCGM 101 7.9.2): 0.05
/// for 2.04 and two digits. 0 for u = 0.
double numericalTolerance(double standardUncertainty, int digits);

struct MonteCarloOptions {
  double probability = kCoverage;
  int digits = 2;                      ///< significant digits of u that must be stable
  double toleranceShare = 1;           ///< stable within this share of the tolerance; 0.2 to validate (8.2)
  std::size_t trials = 0;              ///< this many, whatever the stability; 0: adaptive (7.9.4)
  std::size_t mostTrials = 2'000'000;  ///< where the adaptive procedure gives up
};

struct MonteCarloOutput {
  double mean = 0;
  double standardUncertainty = 0;
  CoverageIntervals interval;
};

struct MonteCarloResult {
  std::size_t trials = 0;
  bool stable =
      false;  ///< mean, u and the symmetric interval met the tolerance; false for a fixed number of trials
  std::vector<MonteCarloOutput> outputs;
  Matrix covariance;  ///< of the outputs (JCGM 102)
};

/// Propagation of distributions (JCGM 101, JCGM 102) of the same model as firstOrder(). With a fixed number
/// of trials, or in at least five blocks of max(100 / (1 - p), 10^4) until twice the standard deviation of
/// the blocks' mean, u and ends of the symmetric interval are within the numerical tolerance. Errors: as
/// Sampler::of(); bad_use for a probability outside 0..1 or fewer than two trials; any error of the function,
/// with the number of the trial.
Result<MonteCarloResult> monteCarlo(const Model& model, Random& random,
                                    const MonteCarloOptions& options = {});

/// Does a stated interval agree with that of a Monte Carlo within a tolerance (JCGM 101 8.1)?
struct Agreement {
  double lowDifference = 0, highDifference = 0;  ///< |stated - Monte Carlo| at either end
  double tolerance = 0;
  bool holds() const { return lowDifference <= tolerance && highDifference <= tolerance; }
};
Agreement agreement(const Interval& stated, const Interval& monteCarlo, double tolerance);

}  // namespace shuntwright::metrology
