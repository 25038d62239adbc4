#include "driver/metrology/monte_carlo.h"

#include <algorithm>
#include <cmath>

#include "driver/metrology/sampler.h"

namespace shuntwright::metrology {
namespace {

/// Mean and standard deviation (n - 1), in two passes.
struct Moments {
  double mean = 0, deviation = 0;
};
Moments momentsOf(std::span<const double> values) {
  const auto n = static_cast<double>(values.size());
  Moments m;
  for (const double v : values) m.mean += v;
  m.mean /= n;
  double squares = 0;
  for (const double v : values) squares += (v - m.mean) * (v - m.mean);
  m.deviation = std::sqrt(squares / (n - 1));
  return m;
}

MonteCarloOutput summaryOf(std::vector<double> values, double probability) {
  const Moments m = momentsOf(values);
  std::sort(values.begin(), values.end());
  return {m.mean, m.deviation, coverageIntervals(values, probability)};
}

/// The figures of every block, for one output.
class Blocks {
 public:
  void add(const MonteCarloOutput& block) {
    const double figures[] = {block.mean, block.standardUncertainty, block.interval.symmetric.low,
                              block.interval.symmetric.high};
    for (std::size_t k = 0; k < 4; ++k) figures_[k].push_back(figures[k]);
  }
  /// Twice the standard deviation of the mean of the least steady figure.
  double unsteadiness() const {
    double worst = 0;
    for (const auto& f : figures_) {
      worst = std::max(worst, 2 * momentsOf(f).deviation / std::sqrt(static_cast<double>(f.size())));
    }
    return worst;
  }

 private:
  std::vector<double> figures_[4];
};

/// Runs trials and keeps every output.
class Trials {
 public:
  Trials(const Model& model, const Sampler& sampler, Random& random)
      : model_(model),
        sampler_(sampler),
        random_(random),
        x_(model.inputs.size()),
        y_(model.outputs),
        values_(model.outputs) {}

  Result<void> run(std::size_t count) {
    for (std::size_t t = 0; t < count; ++t) {
      sampler_.draw(random_, x_);
      std::fill(y_.begin(), y_.end(), 0.0);
      if (auto done = model_.function(x_, y_); !done) {
        return std::unexpected(
            std::move(done.error())
                .wrap("trial " + std::to_string(values_.front().size() + 1) + " of a Monte Carlo"));
      }
      for (std::size_t k = 0; k < y_.size(); ++k) values_[k].push_back(y_[k]);
    }
    return {};
  }
  const std::vector<double>& of(std::size_t output) const { return values_[output]; }
  std::size_t count() const { return values_.front().size(); }

  Matrix covariance() const {
    Matrix v(values_.size(), values_.size());
    std::vector<double> means;
    for (const auto& values : values_) means.push_back(momentsOf(values).mean);
    for (std::size_t k = 0; k < v.rows; ++k) {
      for (std::size_t l = k; l < v.rows; ++l) {
        double sum = 0;
        for (std::size_t t = 0; t < count(); ++t)
          sum += (values_[k][t] - means[k]) * (values_[l][t] - means[l]);
        v(k, l) = v(l, k) = sum / static_cast<double>(count() - 1);
      }
    }
    return v;
  }

 private:
  const Model& model_;
  const Sampler& sampler_;
  Random& random_;
  std::vector<double> x_, y_;
  std::vector<std::vector<double>> values_;
};

/// Two blocks, the least that 7.9.4 asks for, agree by chance too often.
constexpr std::size_t kLeastBlocks = 5;

/// JCGM 101 7.9.4: blocks until every output is steady. Returns whether it came to that.
Result<bool> runUntilSteady(Trials& trials, std::size_t outputs, const MonteCarloOptions& options) {
  const auto least = static_cast<std::size_t>(std::ceil(100 / (1 - options.probability)));
  const std::size_t block = std::max<std::size_t>(least, 10'000);
  std::vector<Blocks> blocks(outputs);
  for (std::size_t h = 1;; ++h) {
    if (auto done = trials.run(block); !done) return std::unexpected(std::move(done.error()));
    bool steady = h >= kLeastBlocks;
    for (std::size_t k = 0; k < outputs; ++k) {
      const auto& all = trials.of(k);
      blocks[k].add(
          summaryOf({all.end() - static_cast<std::ptrdiff_t>(block), all.end()}, options.probability));
      if (h < kLeastBlocks) continue;
      const double tolerance =
          options.toleranceShare * numericalTolerance(momentsOf(all).deviation, options.digits);
      steady = steady && blocks[k].unsteadiness() <= tolerance;
    }
    if (steady || trials.count() + block > options.mostTrials) return steady;
  }
}

}  // namespace

CoverageIntervals coverageIntervals(std::span<const double> sorted, double probability) {
  const std::size_t count = sorted.size();
  const auto asked = static_cast<std::size_t>(std::lround(probability * static_cast<double>(count)));
  const std::size_t q = std::clamp<std::size_t>(asked, 1, count - 1);
  const std::size_t left = (count - q + 1) / 2 - 1;  // 7.7.2 counts from 1
  CoverageIntervals out;
  out.symmetric = {sorted[left], sorted[left + q]};
  out.shortest = {sorted[0], sorted[q]};
  for (std::size_t r = 1; r + q < count; ++r) {
    if (sorted[r + q] - sorted[r] < out.shortest.width()) out.shortest = {sorted[r], sorted[r + q]};
  }
  return out;
}

double numericalTolerance(double standardUncertainty, int digits) {
  if (!(standardUncertainty > 0)) return 0;
  double exponent = std::floor(std::log10(standardUncertainty)) - digits + 1;
  // Rounding up may add a digit: 0.996 with two digits is 1.0, not 100 x 10^-2.
  if (std::round(standardUncertainty / std::pow(10, exponent)) >= std::pow(10, digits)) exponent += 1;
  return 0.5 * std::pow(10, exponent);
}

Result<MonteCarloResult> monteCarlo(const Model& model, Random& random, const MonteCarloOptions& options) {
  if (!(options.probability > 0 && options.probability < 1)) {
    return fail(ErrorCode::bad_use, "a coverage probability must lie between 0 and 1");
  }
  if (options.trials == 1) return fail(ErrorCode::bad_use, "a Monte Carlo needs at least two trials");
  auto sampler = Sampler::of(model);
  if (!sampler) return std::unexpected(std::move(sampler.error()));
  Trials trials(model, *sampler, random);
  MonteCarloResult result;
  if (options.trials > 0) {
    if (auto done = trials.run(options.trials); !done) return std::unexpected(std::move(done.error()));
  } else {
    auto steady = runUntilSteady(trials, model.outputs, options);
    if (!steady) return std::unexpected(std::move(steady.error()));
    result.stable = *steady;
  }
  result.trials = trials.count();
  for (std::size_t k = 0; k < model.outputs; ++k) {
    result.outputs.push_back(summaryOf(trials.of(k), options.probability));
  }
  result.covariance = trials.covariance();
  return result;
}

Agreement agreement(const Interval& stated, const Interval& monteCarlo, double tolerance) {
  return {std::abs(stated.low - monteCarlo.low), std::abs(stated.high - monteCarlo.high), tolerance};
}

}  // namespace shuntwright::metrology
