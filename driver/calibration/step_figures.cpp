#include "driver/calibration/step_figures.h"

#include <algorithm>
#include <cmath>
#include <limits>

#include "driver/metrology/coverage.h"

namespace shuntwright::calibration {

using namespace units;

namespace {

/// Weight of the later of two open windows in the line through both, at the middle of the closed one between
/// them.
double laterWeight(const ShuntReadings& readings, std::size_t k) {
  const auto middle_s = [&](const Window& w) {
    return seconds(w.start - readings.opened[k].start) + 0.5 * seconds(w.end - w.start);
  };
  const double before = middle_s(readings.opened[k]), after = middle_s(readings.opened[k + 1]);
  return after > before ? (middle_s(readings.closed[k]) - before) / (after - before) : 0.5;
}

std::size_t stepCount(const ShuntReadings& readings) {
  return readings.opened.empty() ? 0 : std::min(readings.closed.size(), readings.opened.size() - 1);
}

}  // namespace

std::vector<Ratio> stepsOf(const ShuntReadings& readings) {
  std::vector<Ratio> steps;
  for (std::size_t k = 0; k < stepCount(readings); ++k) {
    const double later = laterWeight(readings, k);
    const Ratio line = (1 - later) * readings.opened[k].mean + later * readings.opened[k + 1].mean;
    steps.push_back(readings.closed[k].mean - line);
  }
  return steps;
}

namespace {

template <class Get>
double meanOf(const std::vector<Window>& windows, Get get) {
  double sum = 0;
  for (const auto& w : windows) sum += get(w);
  return windows.empty() ? 0 : sum / static_cast<double>(windows.size());
}

double valueOf(Ratio r) {
  return r.in(volt_per_volt);
}

}  // namespace

StepFigures figuresOf(const description::Shunt& shunt, const ShuntReadings& readings, double correlation) {
  StepFigures f;
  ShuntResult& r = f.result;
  r.name = shunt.name;
  r.settling = readings.settling;
  r.repeats = static_cast<int>(readings.closed.size());
  const Ratio unknown = std::numeric_limits<double>::quiet_NaN() * volt_per_volt;
  r.before = r.returned = r.after = r.measuredStep = unknown;
  if (readings.opened.empty()) return f;
  r.before = readings.opened.front().mean;
  r.returned = readings.opened.back().mean;
  if (readings.closed.empty()) return f;
  r.after = meanOf(readings.closed, [](const Window& w) { return valueOf(w.mean); }) * volt_per_volt;
  const auto steps = stepsOf(readings);
  if (steps.empty()) return f;
  for (const auto* windows : {&readings.opened, &readings.closed}) {
    // A window without a usable sample has no mean, and no step.
    if (!std::ranges::all_of(*windows, [](const Window& w) { return w.samples > 0; })) return f;
  }
  const auto count = static_cast<double>(steps.size());
  double mean = 0;
  for (const auto step : steps) mean += valueOf(step) / count;
  r.measuredStep = mean * volt_per_volt;
  double square = 0;
  for (const auto step : steps) square += (valueOf(step) - mean) * (valueOf(step) - mean);
  const double repeatDeviation = steps.size() > 1 ? std::sqrt(square / (count - 1)) : 0;
  r.stepDeviation = repeatDeviation * volt_per_volt;

  double variance = 0, degrees = 0, samples = 0;
  for (const auto* windows : {&readings.opened, &readings.closed}) {
    for (const auto& w : *windows) {
      const double own = std::max(1, w.samples - 2);
      variance += own * valueOf(w.deviation) * valueOf(w.deviation);
      degrees += own;
      samples += w.samples;
    }
  }
  variance /= std::max(1.0, degrees);
  r.noise = std::sqrt(variance) * volt_per_volt;
  const double perWindow =
      variance * correlation /
      std::max(1.0, samples / static_cast<double>(readings.opened.size() + readings.closed.size()));
  // Each window by its weight in the mean step; two neighbouring steps share an open one.
  std::vector<double> weights(steps.size() + 1, 0.0);
  double squares = 1 / count;
  for (std::size_t k = 0; k < steps.size(); ++k) {
    const double later = laterWeight(readings, k);
    weights[k] += (1 - later) / count;
    weights[k + 1] += later / count;
  }
  for (const double weight : weights) squares += weight * weight;
  f.u_V_per_V = std::sqrt(perWindow * squares);
  const double k = metrology::studentFactor(metrology::kInfinity);
  r.returnUncertainty = k * std::sqrt(2 * perWindow) * volt_per_volt;
  // Samples that a filter makes alike say less about their scatter, too.
  f.degrees = std::max(1.0, degrees / correlation);
  // GUM E.4.3: relative standard uncertainty of a standard deviation.
  r.noiseUncertainty = k / std::sqrt(2 * f.degrees) * r.noise;
  // Repeats that scatter far more than the noise explains speak for themselves.
  const double expected = std::sqrt(perWindow * 1.5);
  if (repeatDeviation > 3 * expected && repeatDeviation > 0) {
    f.u_V_per_V = repeatDeviation / std::sqrt(count);
    f.degrees = count - 1;
  }
  return f;
}

}  // namespace shuntwright::calibration
