#include "driver/calibration/strain_model.h"

#include <algorithm>
#include <cmath>

#include "driver/calibration/measurement_model.h"
#include "driver/metrology/first_order.h"

namespace shuntwright::calibration {

using namespace units;
using description::Channel;
using description::Rack;
using description::Unbalance;
using metrology::normal;
using metrology::rectangular;
using metrology::triangular;

namespace {

double valueOf(Ratio r) {
  return r.in(volt_per_volt);
}

/// What the readings mean for one circuit.
struct Meaning {
  double span = 1;
  WorkingPoint inTest;
};

Result<Meaning> meaningOf(const ChannelModel& model, const ScaleReadings& readings, double nominalSpan) {
  auto prediction = predictScale(model, readings.zero);
  if (!prediction) return std::unexpected(std::move(prediction.error()));
  Meaning meaning;
  meaning.span = spanOf(readings.measured, prediction->steps, readings.weights);
  auto point = explain(model.atCalibration, readings.zero * (nominalSpan / meaning.span), model.cause);
  if (!point) return std::unexpected(std::move(point.error()));
  meaning.inTest = moved(*point, model.atCalibration, model.inTest);
  return meaning;
}

/// Reading over the span when so much strain has been added.
Result<double> ratioAt(const Meaning& meaning, double strainValue) {
  auto r = bridge::ratio(meaning.inTest.circuit, meaning.inTest.standing + strainValue * strain);
  if (!r) return std::unexpected(std::move(r.error()));
  return valueOf(*r);
}

/// The strain at which the circuit shows this ratio, next to a strain at which it almost does.
Result<double> strainNear(const Meaning& meaning, double ratio, double guess, double slope) {
  constexpr int kRounds = 8;
  constexpr double kSmall = 1e-12;
  for (int round = 0; round < kRounds; ++round) {
    const auto there = ratioAt(meaning, guess);
    if (!there) return there;
    const double by = (ratio - *there) / slope;
    guess += by;
    if (std::abs(by) < kSmall) break;
  }
  return guess;
}

/// Evaluates the outputs of a circuit, for readings that the nominal one explains.
class Outputs {
 public:
  static Result<Outputs> of(const ChannelModel& nominal, const ScaleReadings& readings,
                            std::span<const Strain> levels) {
    Outputs out;
    out.readings_ = readings;
    auto prediction = predictScale(nominal, readings.zero);
    if (!prediction) return std::unexpected(std::move(prediction.error()));
    out.slope_ = prediction->slope_per_strain;
    out.span_ = spanOf(readings.measured, prediction->steps, readings.weights);
    auto meaning = meaningOf(nominal, readings, out.span_);
    if (!meaning) return std::unexpected(std::move(meaning.error()));
    for (const Strain level : levels) {
      const double e = level.in(strain);
      const auto r = ratioAt(*meaning, e);
      if (!r) return std::unexpected(r.error());
      out.levels_.push_back({e, *r});
    }
    return out;
  }

  Result<void> evaluate(const ChannelModel& model, std::span<double> y) const {
    const auto meaning = meaningOf(model, readings_, span_);
    if (!meaning) return std::unexpected(meaning.error());
    y[0] = 100 * (meaning->span / span_ - 1);
    for (std::size_t k = 0; k < levels_.size(); ++k) {
      const auto e =
          strainNear(*meaning, levels_[k].ratio * span_ / meaning->span, levels_[k].strain, slope_);
      if (!e) return std::unexpected(e.error());
      y[1 + k] = *e - levels_[k].strain;
    }
    return {};
  }

  double slope() const { return slope_; }

 private:
  struct Level {
    double strain, ratio;
  };
  ScaleReadings readings_;
  std::vector<Level> levels_;
  double span_ = 1, slope_ = 0;
};

void addScatter(MeasurementInputs& inputs, const StrainReadings& readings, double slope,
                std::span<const Strain> levels) {
  const ReadingScatter& steps = readings.scale.scatter;
  const ZeroScatter& zero = readings.zero;
  const auto strainOf = [slope](Ratio r) { return valueOf(r) / std::abs(slope); };
  const double step = std::abs(valueOf(steps.smallestStep));
  const double digits = step > 0 ? valueOf(steps.resolution) / step : 0;
  inputs.addToOutput("noise and repeats of the steps", "%",
                     normal(0, 100 * steps.stepRelative, steps.stepDegrees));
  inputs.addToOutput("resolution of the steps", "%", triangular(0, 100 * digits));
  for (std::size_t k = 0; k < levels.size(); ++k) {
    const auto add = [&](const char* quantity, const metrology::Distribution& in) {
      inputs.addToOutput(quantity, "m/m", in, 1 + k);
    };
    const double level = std::abs(levels[k].in(strain));
    add("noise and repeats of the steps", normal(0, level * steps.stepRelative, steps.stepDegrees));
    add("resolution of the steps", triangular(0, level * digits));
    add("noise of the zero reading", normal(0, strainOf(zero.standardUncertainty)));
    add("resolution of zero and reading", triangular(0, strainOf(zero.resolution)));
    add("zero return", rectangular(0, strainOf(zero.returnSpread)));
    add("stability of the amplifier", rectangular(0, strainOf(zero.stability)));
    add("noise of the reading", normal(0, strainOf(readings.noise)));
  }
}

}  // namespace

/// batch).
Fraction factorTolerance(const Rack& rack, const Channel& channel) {
  if (channel.transducer) return channel.transducer->sensitivityTolerance;
  const auto weights = description::armWeights(channel.circuit, channel.poisson);
  double sum = 0, whole = 0;
  for (std::size_t arm = 0; arm < weights.size(); ++arm) {
    if (weights[arm] == 0) continue;
    const auto gauge = rack.gaugeOf(channel, arm);
    const double share = std::abs(weights[arm]) * gauge.factor.value();
    sum += share * gauge.factorTolerance.in(one);
    whole += share;
  }
  return sum / whole * one;
}

Strain largestStrain(const Channel& channel) {
  if (channel.transducer) return 1.0 * strain;
  return channel.expected.value_or(1000.0 * microstrain);
}

Result<metrology::Model> strainModel(const Rack& rack, const Channel& channel, const StrainReadings& readings,
                                     std::span<const Strain> levels) {
  const ChannelModel withLeads = modelWithLeads(rack, channel);
  auto outputs = Outputs::of(modelOf(rack, channel), readings.scale, levels);
  if (!outputs) return std::unexpected(std::move(outputs.error()));
  std::vector<double> nominal(1 + levels.size());
  if (auto done = outputs->evaluate(withLeads, nominal); !done)
    return std::unexpected(std::move(done.error()));

  MeasurementInputs inputs(withLeads);
  for (auto& in : inputsOf(rack, channel)) {
    if (in.input.quantity == kLeadsWarming)
      in.input.distribution.standardUncertainty *= readings.zero.leadsShare;
    inputs.add(std::move(in));
  }
  const auto unitOf = [](std::size_t output) { return output == 0 ? "%" : "m/m"; };
  if (channel.leadLoss == description::LeadLoss::in_span) {
    // Corrected with no leads: what is left of them is the part that the steps do not carry.
    for (std::size_t i = 0; i < nominal.size(); ++i) {
      inputs.addToOutput("lead loss not carried by the steps", unitOf(i),
                         rectangular(0, std::abs(nominal[i])), i);
    }
  }
  if (channel.unbalance == Unbalance::unknown) {
    std::vector<double> worst(nominal.size()), there(nominal.size());
    for (const Unbalance cause : {Unbalance::standing_strain, Unbalance::completion}) {
      ChannelModel other = withLeads;
      other.cause = cause;
      if (!outputs->evaluate(other, there)) continue;
      for (std::size_t i = 0; i < worst.size(); ++i)
        worst[i] = std::max(worst[i], std::abs(there[i] - nominal[i]));
    }
    for (std::size_t i = 0; i < worst.size(); ++i) {
      inputs.addToOutput("cause of unbalance", unitOf(i), rectangular(0, worst[i]), i);
    }
  }
  addScatter(inputs, readings, outputs->slope(), levels);
  return std::move(inputs).model(nominal.size(),
                                 [outputs = std::move(*outputs), nominal](
                                     const ChannelModel& model, std::span<double> y) -> Result<void> {
                                   if (auto done = outputs.evaluate(model, y); !done) return done;
                                   for (std::size_t i = 0; i < nominal.size(); ++i) y[i] -= nominal[i];
                                   return {};
                                 });
}

Result<std::vector<StrainUncertainty>> strainUncertainties(const Rack& rack, const Channel& channel,
                                                           const StrainReadings& readings,
                                                           std::span<const Strain> levels,
                                                           Fraction factorTolerance) {
  auto model = strainModel(rack, channel, readings, levels);
  if (!model) return std::unexpected(std::move(model.error()));
  auto propagated = metrology::firstOrder(*model);
  if (!propagated) return std::unexpected(std::move(propagated.error()));
  // Leads that differ (many shares: normal) times leads that warm (a rectangle): such a product holds 95.45 %
  // within 2.245 of its standard deviations, not within 2.
  constexpr double kProductTails = 2.245 / 2;
  const double second = readings.zeroSecondOrderVariance * kProductTails * kProductTails;

  std::vector<StrainUncertainty> out;
  for (std::size_t k = 0; k < levels.size(); ++k) {
    metrology::Estimate estimate = propagated->outputs[1 + k];
    estimate.secondOrderVariance = second;
    StrainUncertainty one{levels[k], metrology::shapedHalfWidth(*model, estimate) * strain, {}};
    metrology::Model whole = *model;
    const double level = std::abs(levels[k].in(strain));
    whole.inputs.push_back({"gauge factor", "", rectangular(0, factorTolerance.in(units::one))});
    estimate.contributions.push_back({level, level * whole.inputs.back().distribution.standardUncertainty});
    one.expandedWithFactor = metrology::shapedHalfWidth(whole, estimate) * strain;
    out.push_back(one);
  }
  return out;
}

}  // namespace shuntwright::calibration
