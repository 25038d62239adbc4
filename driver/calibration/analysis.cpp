#include "driver/calibration/analysis.h"

#include <algorithm>
#include <cmath>
#include <limits>

#include "driver/calibration/channel_model.h"
#include "driver/calibration/uncertainty.h"

namespace shuntwright::calibration {

using namespace units;
using metrology::Component;
using metrology::coverageHalfWidth;
using metrology::Shape;
using metrology::studentFactor;
using description::Channel;
using description::Rack;

namespace {

/// Weight of the later of two open windows in the line through both, at the middle of the closed one between them.
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

double correlationFactor(const Rack& rack, const Channel& channel) {
  const auto& device = *rack.device(channel.device);
  const double tau_s = seconds(device.profile->inputs->filterTimeConstant);
  if (tau_s <= 0) return 1;
  double rate_Hz = 10;
  if (device.rate) {
    rate_Hz = device.rate->in(hertz);
  } else if (!device.profile->inputs->rates.empty()) {
    rate_Hz = device.profile->inputs->rates.front().in(hertz);
  }
  const double rho = std::exp(-1 / (rate_Hz * tau_s));
  return (1 + rho) / (1 - rho);
}

bool isAbsolute(const Channel& channel) { return channel.transducer && channel.shunts.empty(); }

Result<void> correct(const Channel& channel, const ChannelModel& model, double span, Ratio zero,
                     ChannelResult& result) {
  const Strain range = channel.transducer ? 1.2 * strain : 20000.0 * microstrain;
  auto point = isAbsolute(channel) ? Result<WorkingPoint>(WorkingPoint{model.inTest, {}})
                        : explain(model.inTest, zero / span, model.cause);
  if (!point) return std::unexpected(std::move(point.error()));
  auto fitted = bridge::mapOf(point->circuit, point->standing, range);
  if (!fitted) return std::unexpected(std::move(fitted.error()));
  result.worstMapError = fitted->worstError;
  result.correction = fitted->map.afterAmplifier(span, 0);
  if (!isAbsolute(channel)) result.correction = result.correction.zeroedAt(zero.in(volt_per_volt));
  return {};
}

namespace {

template <class Get>
double meanOf(const std::vector<Window>& windows, Get get) {
  double sum = 0;
  for (const auto& w : windows) sum += get(w);
  return windows.empty() ? 0 : sum / static_cast<double>(windows.size());
}

double valueOf(Ratio r) { return r.in(volt_per_volt); }

/// Figures of one shunt, and the standard uncertainty of its mean step.
struct StepFigures {
  ShuntResult result;
  double u_V_per_V = 0;
  double degrees = 1;
};

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
      variance * correlation / std::max(1.0, samples / static_cast<double>(readings.opened.size() + readings.closed.size()));
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
  // Samples that a filter makes alike say less about their scatter, too.
  f.degrees = std::max(1.0, degrees / correlation);
  // Repeats that scatter far more than the noise explains speak for themselves.
  const double expected = std::sqrt(perWindow * 1.5);
  if (repeatDeviation > 3 * expected && repeatDeviation > 0) {
    f.u_V_per_V = repeatDeviation / std::sqrt(count);
    f.degrees = count - 1;
  }
  return f;
}

/// Half-width for the whole bridge: its gauges by their shares in the signal, all off the same way (one batch).
double factorTolerance_percent(const Rack& rack, const Channel& channel) {
  const auto weights = description::armWeights(channel.circuit, channel.poisson);
  double sum = 0, whole = 0;
  for (std::size_t arm = 0; arm < weights.size(); ++arm) {
    if (weights[arm] == 0) continue;
    const auto gauge = rack.gaugeOf(channel, arm);
    const double share = std::abs(weights[arm]) * gauge.factor.value();
    sum += share * gauge.factorTolerance.in(percent);
    whole += share;
  }
  return sum / whole;
}

void describeChannel(const Rack& rack, const Channel& channel, ChannelResult& result) {
  result.name = channel.name;
  if (channel.transducer) {
    result.unit = channel.transducer->unit;
    result.unitsPerStrain = channel.transducer->ratedValue;
  }
  const double factor_percent =
      channel.transducer ? channel.transducer->sensitivityTolerance.in(percent) : factorTolerance_percent(rack, channel);
  const Component rectangle{Shape::rectangular, factor_percent / std::sqrt(3.0)};
  result.factorUncertainty_percent = coverageHalfWidth(std::span(&rectangle, 1));
  if (channel.leads.empty()) return;
  double sum = 0, worst = 0;
  for (const auto& [terminal, lead] : channel.leads) {
    const double r = lead.resistance.in(ohm);
    sum += r;
    const double warmth = 0.00393 * lead.temperatureTolerance.in(kelvin);
    const Component parts[] = {{Shape::rectangular, r * lead.tolerance.in(one) / std::sqrt(3.0)},
                               {Shape::rectangular, r * warmth / std::sqrt(3.0)}};
    worst = std::max(worst, coverageHalfWidth(parts));
  }
  result.leadResistance = sum / static_cast<double>(channel.leads.size()) * ohm;
  result.leadUncertainty = worst * ohm;
}

}  // namespace

ChannelResult analyse(const Rack& rack, const Channel& channel, const ChannelReadings& readings) {
  ChannelResult result;
  describeChannel(rack, channel, result);
  const ChannelModel model = modelOf(rack, channel);
  const double correlation = correlationFactor(rack, channel);
  if (readings.zero) {
    result.zero = readings.zero->mean;
    result.lostSamples += readings.zero->lost;
  } else if (!readings.shunts.empty() && !readings.shunts.front().opened.empty()) {
    // No zero could be read; the first reading of all was taken with every relay open, too.
    result.zero = readings.shunts.front().opened.front().mean;
  }

  std::vector<Ratio> measured;
  std::vector<metrology::WeightedDegrees> weighted;
  double variance = 0, squares = 0, worstReturn = 0, smallest = 0;
  for (std::size_t k = 0; k < readings.shunts.size(); ++k) {
    StepFigures f = figuresOf(channel.shunts[k], readings.shunts[k], correlation);
    measured.push_back(f.result.measuredStep);
    for (const auto* windows : {&readings.shunts[k].opened, &readings.shunts[k].closed}) {
      for (const auto& w : *windows) result.lostSamples += w.lost;
    }
    if (f.result.measured()) {
      const double step = std::abs(valueOf(f.result.measuredStep));
      const double u = step * f.u_V_per_V;
      weighted.push_back({u, f.degrees});
      variance += u * u;
      squares += step * step;
      smallest = smallest == 0 ? step : std::min(smallest, step);
      worstReturn = std::max(worstReturn, std::abs(valueOf(f.result.returned - f.result.before)));
    }
    result.shunts.push_back(std::move(f.result));
  }

  // Span and working point depend a little on each other (zero = reading / span): a few rounds settle it.
  double span = 1, slope = 0;
  std::optional<Error> trouble;
  for (int round = 0; round < 4; ++round) {
    auto prediction = predictScale(model, result.zero / span);
    if (!prediction) {
      trouble = std::move(prediction.error());
      break;
    }
    slope = prediction->slope_per_strain;
    for (std::size_t k = 0; k < result.shunts.size(); ++k) result.shunts[k].predictedStep = prediction->steps[k];
    span = spanOf(measured, prediction->steps);
    if (!(span > 0.2 && span < 5)) break;  // judged below; not a span to correct with
  }
  result.spanRatio = span;
  const double usable = span > 0.2 && span < 5 ? span : 1;
  if (!trouble) {
    if (auto corrected = correct(channel, model, usable, result.zero, result); !corrected) {
      trouble = std::move(corrected.error());
    }
  }
  const Ratio resolution = rack.device(channel.device)->profile->inputs->resolution;
  if (!trouble && squares > 0) {
    ScaleReadings scale{result.zero / usable, measured, {}};
    scale.scatter.stepRelative = std::sqrt(variance) / squares;
    scale.scatter.stepDegrees = metrology::effectiveDegrees(weighted);
    scale.scatter.resolution = resolution;
    scale.scatter.smallestStep = smallest * volt_per_volt;
    auto budget = scaleBudget(rack, channel, scale);
    if (budget) {
      result.budget = std::move(*budget);
    } else {
      trouble = std::move(budget.error());
    }
  }
  if (!trouble && readings.zero) {
    const Window& zero = *readings.zero;
    ZeroScatter scatter;
    scatter.standardUncertainty =
        zero.deviation * std::sqrt(correlation / std::max(1, zero.samples)) / usable;
    scatter.resolution = resolution / usable;
    scatter.returnSpread = worstReturn / usable * volt_per_volt;
    scatter.stability = rack.device(channel.device)->profile->inputs->zeroStability / usable;
    if (auto u = zeroUncertainty(rack, channel, result.zero / usable, scatter)) {
      result.zeroExpandedUncertainty = studentFactor(std::numeric_limits<double>::infinity()) * *u;
    }
  }
  // Limits in microstrain speak of strain gauges; for a transducer they are taken as the indicated strain of a
  // quarter bridge of factor 2.
  judge(result, readings, rack.limits, channel.transducer ? 0.5 : slope);
  if (trouble) {
    result.findings.push_back({"no-solution", trouble->message, trouble->remedy});
    result.verdict = Verdict::fail;
    if (auto nominal = bridge::mapOf(model.inTest)) result.correction = nominal->map;
  }
  return result;
}

}  // namespace shuntwright::calibration
