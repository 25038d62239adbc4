#include "driver/calibration/analysis.h"

#include <algorithm>
#include <cmath>

#include "driver/calibration/basis.h"
#include "driver/calibration/channel_model.h"
#include "driver/calibration/identified_model.h"
#include "driver/calibration/lead_readings.h"
#include "driver/calibration/linearity.h"
#include "driver/calibration/step_figures.h"
#include "driver/calibration/strain_model.h"
#include "driver/calibration/uncertainty.h"

namespace shuntwright::calibration {

using namespace units;
using description::Channel;
using description::Rack;
using metrology::Component;
using metrology::coverageHalfWidth;
using metrology::Shape;
using metrology::studentFactor;

namespace {

double valueOf(Ratio r) {
  return r.in(volt_per_volt);
}

}  // namespace

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

double correlationSeen(std::span<const Window> windows, double most) {
  double differences = 0, squares = 0;
  for (const Window& w : windows) {
    if (w.samples < 3) continue;
    differences += (w.samples - 1) * valueOf(w.successive) * valueOf(w.successive);
    squares += (w.samples - 1) * valueOf(w.deviation) * valueOf(w.deviation);
  }
  if (squares <= 0) return most;
  const double rho = std::clamp(1 - differences / (2 * squares), 0.0, (most - 1) / (most + 1));
  return (1 + rho) / (1 - rho);
}

bool isAbsolute(const Channel& channel) {
  return channel.transducer && channel.shunts.empty();
}

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

void describeChannel(const Rack& rack, const Channel& channel, ChannelResult& result) {
  result.name = channel.name;
  if (channel.transducer) {
    result.unit = channel.transducer->unit;
    result.unitsPerStrain = channel.transducer->ratedValue;
  }
  const double factor_percent = factorTolerance(rack, channel).in(percent);
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

std::vector<Window> windowsOf(const ChannelReadings& readings) {
  std::vector<Window> out;
  for (const auto& shunt : readings.shunts) {
    for (const auto* windows : {&shunt.opened, &shunt.closed})
      out.insert(out.end(), windows->begin(), windows->end());
  }
  if (readings.zero) out.push_back(*readings.zero);
  return out;
}

/// One channel's way from readings to correction, budget and verdict.
class Analysis {
 public:
  Analysis(const Rack& rack, const Channel& channel, const ChannelReadings& readings)
      : rack_(rack),
        channel_(channel),
        readings_(readings),
        model_(modelOf(rack, channel)),
        correlation_(correlationSeen(windowsOf(readings), correlationFactor(rack, channel))),
        digit_(rack.device(channel.device)->profile->inputs->resolution),
        factorTolerance_(factorTolerance(rack, channel)) {}

  ChannelResult run() {
    describeChannel(rack_, channel_, result_);
    takeZero();
    takeSteps();
    auto done = solve();
    // Limits in microstrain speak of strain gauges; for a transducer they are taken as the indicated strain
    // of a quarter bridge of factor 2.
    judge(result_, readings_, rack_.limits, channel_.transducer ? 0.5 : slope_);
    if (!done) {
      result_.findings.push_back({"no-solution", done.error().message, done.error().remedy});
      result_.verdict = Verdict::fail;
      if (auto nominal = bridge::mapOf(model_.inTest)) result_.correction = nominal->map;
    }
    return std::move(result_);
  }

  Behind behind() const { return {strains_, fit_}; }

 private:
  void takeZero() {
    if (readings_.zero && readings_.zero->samples > 0) {
      const Window& zero = *readings_.zero;
      result_.zero = zero.mean;
      result_.lostSamples += zero.lost;
      zeroNoise_ = zero.deviation * std::sqrt(correlation_ / std::max(1, zero.samples));
    } else if (!readings_.shunts.empty() && !readings_.shunts.front().opened.empty()) {
      // No zero could be read; the first reading of all was taken with every relay open, too.
      result_.zero = readings_.shunts.front().opened.front().mean;
    }
    result_.zeroReadingUncertainty = studentFactor(metrology::kInfinity) * zeroNoise_;
  }

  void takeSteps() {
    for (std::size_t k = 0; k < readings_.shunts.size(); ++k) {
      StepFigures f = figuresOf(channel_.shunts[k], readings_.shunts[k], correlation_);
      scale_.measured.push_back(f.result.measuredStep);
      const double digits = valueOf(resolutionOfStep(digit_));
      noise_.push_back(std::hypot(f.u_V_per_V, digits) * volt_per_volt);
      for (const auto* windows : {&readings_.shunts[k].opened, &readings_.shunts[k].closed}) {
        for (const auto& w : *windows) result_.lostSamples += w.lost;
      }
      if (f.result.measured()) {
        ++measured_;
        const double step = std::abs(valueOf(f.result.measuredStep));
        smallest_ = smallest_ == 0 ? step : std::min(smallest_, step);
        // Noise alone moves a reading, too, and is counted already.
        const double back = valueOf(f.result.returned - f.result.before),
                     noise = valueOf(f.result.returnUncertainty);
        worstReturn_ = std::max(worstReturn_, std::sqrt(std::max(0.0, back * back - noise * noise)));
      }
      result_.shunts.push_back(f.result);
      figures_.push_back(std::move(f));
    }
  }

  Result<void> solve() {
    if (channel_.leadLoss == description::LeadLoss::identified) identifyLeads();
    if (auto done = findSpan(); !done) return done;
    const double usable = usableSpan();
    if (auto done = correct(channel_, model_, usable, result_.zero, result_); !done) return done;
    if (measured_ > 0) {
      if (auto done = budgetScale(usable); !done) return done;
      if (auto done = findStraightness(); !done) return done;
    }
    return readings_.zero ? budgetStrain(usable) : Result<void>();
  }

  /// Leads and span from all steps at once. Where these do not tell, the leads stay as stated and the channel
  /// fails.
  void identifyLeads() {
    auto fit =
        LeadFit::of(leadReadingsOf(rack_, channel_, scale_.measured, noise_, result_.zero, zeroNoise_));
    if (!fit) {
      result_.findings.push_back({"leads-not-identified", fit.error().message, fit.error().remedy});
      return;
    }
    LeadIdentification found = identified(*fit);
    found.stated = meanLead(model_.atCalibration);
    if (found.identifiable) {
      fit_ = std::move(*fit);
      model_ = fit_->situationAt(fit_->estimate()).model;
      // Their tolerance stays: what they may be off each other is what moves a zero as they warm.
      for (const auto& lead : found.leads) channel_.leads.at(lead.terminal).resistance = lead.resistance;
      result_.leadResistance = found.resistance;
      result_.leadUncertainty = found.expandedUncertainty;
    } else {
      result_.findings.push_back(
          {"leads-not-identified", found.reason, found.advice ? found.advice->what : ""});
    }
    result_.leads = std::move(found);
  }

  double usableSpan() const {
    return result_.spanRatio > 0.2 && result_.spanRatio < 5 ? result_.spanRatio : 1;
  }

  /// Span and working point depend a little on each other (zero = reading / span): a few rounds settle it.
  Result<void> findSpan() {
    for (int round = 0; round < 4; ++round) {
      auto prediction = predictScale(model_, result_.zero / result_.spanRatio);
      if (!prediction) return std::unexpected(std::move(prediction.error()));
      slope_ = prediction->slope_per_strain;
      for (std::size_t k = 0; k < result_.shunts.size(); ++k) {
        result_.shunts[k].predictedStep = prediction->steps[k];
      }
      if (measured_ > 0 && scale_.weights.empty()) {
        auto uncertain = predictedSteps(rack_, channel_, result_.zero / result_.spanRatio);
        if (!uncertain) return std::unexpected(std::move(uncertain.error()));
        predicted_ = std::move(*uncertain);
        scale_.weights = stepWeights(predicted_, noise_);
      }
      if (fit_) {
        result_.spanRatio = result_.leads->span;
        break;
      }
      result_.spanRatio = spanOf(scale_.measured, prediction->steps, scale_.weights);
      if (usableSpan() != result_.spanRatio) break;  // judged later; not a span to correct with
    }
    return {};
  }

  Result<void> budgetScale(double usable) {
    std::vector<metrology::WeightedDegrees> parts;
    double variance = 0, whole = 0;
    for (std::size_t k = 0; k < figures_.size(); ++k) {
      if (!figures_[k].result.measured()) continue;
      const double step = std::abs(valueOf(result_.shunts[k].predictedStep));
      const double u = scale_.weights[k] * step * figures_[k].u_V_per_V;
      parts.push_back({u, figures_[k].degrees});
      variance += u * u;
      whole += scale_.weights[k] * step * std::abs(valueOf(result_.shunts[k].measuredStep));
    }
    scale_.zero = result_.zero / usable;
    scale_.scatter.stepRelative = whole > 0 ? std::sqrt(variance) / whole : 0;
    scale_.scatter.stepDegrees = metrology::effectiveDegrees(parts);
    scale_.scatter.resolution = digit_;
    scale_.scatter.smallestStep = smallest_ * volt_per_volt;
    auto budget = fit_ ? budgetOfIdentified() : scaleBudget(rack_, channel_, scale_);
    if (!budget) return std::unexpected(std::move(budget.error()));
    result_.budget = std::move(*budget);
    return {};
  }

  Result<Budget> budgetOfIdentified() const {
    const auto model = identifiedModel(*fit_, rack_, channel_, {scale_, {}, {}, 0}, {});
    if (!model) return std::unexpected(model.error());
    return budgetOf(*model, Claims::kScale);
  }

  Result<void> findStraightness() {
    for (std::size_t k = 0; k < result_.shunts.size(); ++k)
      predicted_.steps[k] = result_.shunts[k].predictedStep;
    const auto line = linearityOf(predicted_, scale_.measured, noise_);
    if (!line) return std::unexpected(line.error());
    for (std::size_t k = 0; k < result_.shunts.size(); ++k) {
      ShuntResult& shunt = result_.shunts[k];
      shunt.residual = line->residuals[k];
      const double step = std::abs(valueOf(shunt.predictedStep));
      const double u = std::hypot(std::sqrt(predicted_.covariance(k, k)), valueOf(noise_[k]));
      if (step > 0) shunt.deviationUncertainty = studentFactor(metrology::kInfinity) * u / step * one;
    }
    if (fit_) {
      straightnessOfFit();
      return {};
    }
    if (measured_ < 2) return {};
    result_.straightness =
        Straightness{line->worst_percent, line->worstExpanded_percent, line->lackOfFit.statistic,
                     line->lackOfFit.degrees, line->lackOfFit.probability};
    return {};
  }

  /// With the leads free, steps and what was known have to agree with the fit.
  void straightnessOfFit() {
    Straightness line{.chiSquared = fit_->chiSquared(),
                      .degreesOfFreedom = result_.leads->degreesOfFreedom,
                      .probability = result_.leads->probability};
    double largest = 0, worst = 0;
    for (auto& shunt : result_.shunts) {
      shunt.residual = shunt.measuredStep - result_.spanRatio * shunt.predictedStep;
      if (!shunt.measured()) continue;
      largest = std::max(largest, std::abs(valueOf(shunt.measuredStep)));
      worst = std::max(worst, std::abs(valueOf(shunt.residual)));
    }
    if (largest > 0) line.worst_percent = 100 * worst / largest;
    result_.straightness = line;
  }

  Result<void> budgetStrain(double usable) {
    strains_ = {scale_, {}, zeroNoise_ / usable, 0};
    ZeroScatter& scatter = strains_.zero;
    scatter.standardUncertainty = zeroNoise_ / usable;
    scatter.resolution = digit_ / usable;
    scatter.returnSpread = worstReturn_ / usable * volt_per_volt;
    scatter.stability = rack_.device(channel_.device)->profile->inputs->zeroStability / usable;
    const auto zero = zeroUncertainty(rack_, channel_, result_.zero / usable, scatter);
    if (!zero) return std::unexpected(zero.error());
    strains_.zeroSecondOrderVariance = zero->secondOrderVariance;
    result_.zeroExpandedUncertainty = studentFactor(metrology::kInfinity) * zero->standard;
    if (measured_ == 0) return {};
    const Strain levels[] = {Strain(), largestStrain(channel_)};
    const auto model = fit_ ? identifiedModel(*fit_, rack_, channel_, strains_, levels)
                            : strainModel(rack_, channel_, strains_, levels);
    if (!model) return std::unexpected(model.error());
    auto found = strainUncertainties(*model, levels, factorTolerance_, strains_.zeroSecondOrderVariance);
    if (!found) return std::unexpected(std::move(found.error()));
    result_.strainUncertainty = std::move(*found);
    return {};
  }

  const Rack& rack_;
  Channel channel_;  ///< with its leads as identified
  const ChannelReadings& readings_;
  ChannelModel model_;
  const double correlation_;
  const Ratio digit_;
  ChannelResult result_;
  std::vector<StepFigures> figures_;
  std::vector<Ratio> noise_;  ///< of each step, with the resolution
  PredictedSteps predicted_;
  ScaleReadings scale_;
  StrainReadings strains_;
  std::optional<LeadFit> fit_;
  Ratio zeroNoise_;
  const Fraction factorTolerance_;
  int measured_ = 0;
  double slope_ = 0, smallest_ = 0, worstReturn_ = 0;
};

}  // namespace

ChannelResult analyse(const Rack& rack, const Channel& channel, const ChannelReadings& readings,
                      Behind* behind) {
  Analysis analysis(rack, channel, readings);
  ChannelResult result = analysis.run();
  result.basis = basisOf(rack, channel);
  if (behind) *behind = analysis.behind();
  return result;
}

}  // namespace shuntwright::calibration
