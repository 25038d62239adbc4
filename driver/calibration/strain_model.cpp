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

/// What the readings mean for one circuit, its span from the steps.
class FromSteps {
 public:
  static Result<FromSteps> of(const ChannelModel& nominal, const ScaleReadings& readings,
                              std::span<const Strain> levels) {
    FromSteps out;
    out.readings_ = readings;
    auto prediction = predictScale(nominal, readings.zero);
    if (!prediction) return std::unexpected(std::move(prediction.error()));
    out.span_ = spanOf(readings.measured, prediction->steps, readings.weights);
    auto meaning = out.meaning(nominal);
    if (!meaning) return std::unexpected(std::move(meaning.error()));
    auto claims = Claims::of(*meaning, levels);
    if (!claims) return std::unexpected(std::move(claims.error()));
    out.claims_ = std::move(*claims);
    return out;
  }

  Result<void> evaluate(const ChannelModel& model, std::span<double> y) const {
    const auto other = meaning(model);
    if (!other) return std::unexpected(other.error());
    return claims_->evaluate(*other, y);
  }

  const Claims& claims() const { return *claims_; }

 private:
  Result<Meaning> meaning(const ChannelModel& model) const {
    auto prediction = predictScale(model, readings_.zero);
    if (!prediction) return std::unexpected(std::move(prediction.error()));
    const double span = spanOf(readings_.measured, prediction->steps, readings_.weights);
    return meaningOf(model, span, readings_.zero * (span_ / span));
  }

  ScaleReadings readings_;
  std::optional<Claims> claims_;
  double span_ = 1;
};

void addStepScatter(MeasurementInputs& inputs, const ReadingScatter& steps, std::span<const Strain> levels) {
  const double step = std::abs(valueOf(steps.smallestStep));
  const double digits = step > 0 ? valueOf(steps.resolution) / step : 0;
  const auto add = [&](const char* unit, double size, std::size_t output) {
    inputs.addToOutput("noise and repeats of the steps", unit,
                       normal(0, size * steps.stepRelative, steps.stepDegrees), output);
    inputs.addToOutput("resolution of the steps", unit, triangular(0, size * digits), output);
  };
  add("%", 100, Claims::kSpan);
  add("%", 100, Claims::kScale);
  for (std::size_t k = 0; k < levels.size(); ++k)
    add("m/m", std::abs(levels[k].in(strain)), Claims::kStrains + k);
}

}  // namespace

std::vector<AddedInput> readingScatter(const StrainReadings& readings, double slope_per_strain,
                                       std::size_t levels) {
  const ZeroScatter& zero = readings.zero;
  const auto strainOf = [&](Ratio r) { return valueOf(r) / std::abs(slope_per_strain); };
  std::vector<AddedInput> out;
  for (std::size_t k = 0; k < levels; ++k) {
    const auto add = [&](const char* quantity, const metrology::Distribution& in) {
      if (in.standardUncertainty > 0) out.push_back({{quantity, "m/m", in}, Claims::kStrains + k});
    };
    add("noise of the zero reading", normal(0, strainOf(zero.standardUncertainty)));
    add("resolution of zero and reading", triangular(0, strainOf(zero.resolution)));
    add("zero return", rectangular(0, strainOf(zero.returnSpread)));
    add("stability of the amplifier", rectangular(0, strainOf(zero.stability)));
    add("noise of the reading", normal(0, strainOf(readings.noise)));
  }
  return out;
}

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
  auto steps = FromSteps::of(modelOf(rack, channel), readings.scale, levels);
  if (!steps) return std::unexpected(std::move(steps.error()));
  std::vector<double> nominal(steps->claims().outputs());
  if (auto done = steps->evaluate(withLeads, nominal); !done) return std::unexpected(std::move(done.error()));

  MeasurementInputs inputs(withLeads);
  for (auto& in : inputsOf(rack, channel)) {
    if (in.input.quantity == kLeadsWarming)
      in.input.distribution.standardUncertainty *= readings.zero.leadsShare;
    inputs.add(std::move(in));
  }
  const auto addToEach = [&](const char* quantity, const std::vector<double>& halfWidths) {
    for (std::size_t i = 0; i < halfWidths.size(); ++i) {
      inputs.addToOutput(quantity, i < Claims::kStrains ? "%" : "m/m",
                         rectangular(0, std::abs(halfWidths[i])), i);
    }
  };
  // Corrected with no leads: what is left of them is the part that the steps do not carry.
  if (channel.leadLoss == description::LeadLoss::in_span)
    addToEach("lead loss not carried by the steps", nominal);
  if (channel.unbalance == Unbalance::unknown) {
    std::vector<double> worst(nominal.size()), there(nominal.size());
    for (const Unbalance cause : {Unbalance::standing_strain, Unbalance::completion}) {
      ChannelModel other = withLeads;
      other.cause = cause;
      if (!steps->evaluate(other, there)) continue;
      for (std::size_t i = 0; i < worst.size(); ++i)
        worst[i] = std::max(worst[i], std::abs(there[i] - nominal[i]));
    }
    addToEach("cause of unbalance", worst);
  }
  addStepScatter(inputs, readings.scale.scatter, levels);
  for (const auto& [input, output] :
       readingScatter(readings, steps->claims().slope_per_strain(), levels.size())) {
    inputs.addToOutput(input.quantity, input.unit, input.distribution, output);
  }
  return std::move(inputs).model(
      nominal.size(),
      [steps = std::move(*steps), nominal](const ChannelModel& model, std::span<double> y) -> Result<void> {
        if (auto done = steps.evaluate(model, y); !done) return done;
        for (std::size_t i = 0; i < nominal.size(); ++i) y[i] -= nominal[i];
        return {};
      });
}

Result<std::vector<StrainUncertainty>> strainUncertainties(const metrology::Model& model,
                                                           std::span<const Strain> levels,
                                                           Fraction factorTolerance,
                                                           double zeroSecondOrderVariance) {
  auto propagated = metrology::firstOrder(model);
  if (!propagated) return std::unexpected(std::move(propagated.error()));
  // Leads that differ (many shares: normal) times leads that warm (a rectangle): such a product holds 95.45 %
  // within 2.245 of its standard deviations, not within 2.
  constexpr double kProductTails = 2.245 / 2;
  const double second = zeroSecondOrderVariance * kProductTails * kProductTails;
  std::vector<StrainUncertainty> out;
  for (std::size_t k = 0; k < levels.size(); ++k) {
    metrology::Estimate estimate = propagated->outputs[Claims::kStrains + k];
    estimate.secondOrderVariance = second;
    StrainUncertainty one{levels[k], metrology::shapedHalfWidth(model, estimate) * strain, {}};
    metrology::Model whole = model;
    const double level = std::abs(levels[k].in(strain));
    whole.inputs.push_back({"gauge factor", "", rectangular(0, factorTolerance.in(units::one))});
    estimate.contributions.push_back({level, level * whole.inputs.back().distribution.standardUncertainty});
    one.expandedWithFactor = metrology::shapedHalfWidth(whole, estimate) * strain;
    out.push_back(one);
  }
  return out;
}

}  // namespace shuntwright::calibration
