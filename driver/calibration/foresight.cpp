#include "driver/calibration/foresight.h"

#include <algorithm>
#include <cmath>
#include <functional>
#include <memory>
#include <vector>

#include "driver/calibration/channel_model.h"
#include "driver/calibration/identified_model.h"
#include "driver/calibration/lead_readings.h"
#include "driver/calibration/linearity.h"
#include "driver/calibration/strain_model.h"
#include "driver/calibration/uncertainty.h"

namespace shuntwright::calibration {

using namespace units;
using description::Channel;
using description::Rack;

namespace {

constexpr Fraction kMeasuredGauge = 0.02 * percent, kCertified = 0.01 * percent;
constexpr Resistance kMeasuredLead = 20.0 * milliohm;
constexpr double kWorthwhile = 0.9;  ///< of the uncertainty as it is

Result<ScaleReadings> readingsToCome(const Rack& rack, const Channel& channel) {
  auto prediction = predictScale(modelWithLeads(rack, channel), Ratio());
  if (!prediction) return std::unexpected(std::move(prediction.error()));
  const auto uncertain = predictedSteps(rack, channel, Ratio());
  if (!uncertain) return std::unexpected(uncertain.error());
  ScaleReadings readings;
  readings.measured = prediction->steps;
  readings.scatter.resolution = rack.device(channel.device)->profile->inputs->resolution;
  readings.weights = stepWeights(
      *uncertain,
      std::vector<Ratio>(readings.measured.size(), resolutionOfStep(readings.scatter.resolution)));
  for (const Ratio step : readings.measured) {
    const Ratio size = std::abs(step.in(volt_per_volt)) * volt_per_volt;
    readings.scatter.smallestStep =
        readings.scatter.smallestStep == Ratio() ? size : std::min(readings.scatter.smallestStep, size);
  }
  return readings;
}

/// What the claims of a channel would rest on: its steps, or the fit of its leads.
Result<metrology::Model> modelToCome(const Rack& rack, const Channel& channel, const StrainReadings& readings,
                                     std::span<const Strain> levels) {
  if (channel.leadLoss != description::LeadLoss::identified)
    return strainModel(rack, channel, readings, levels);
  auto fit = leadFitToCome(rack, channel);
  if (!fit) return std::unexpected(std::move(fit.error()));
  return identifiedModel(*fit, rack, channel, readings, levels);
}

Result<Budget> budgetToCome(const Rack& rack, const Channel& channel) {
  auto readings = readingsToCome(rack, channel);
  if (!readings) return std::unexpected(std::move(readings.error()));
  if (channel.leadLoss != description::LeadLoss::identified) return scaleBudget(rack, channel, *readings);
  auto model = modelToCome(rack, channel, {std::move(*readings), {}, {}, 0}, {});
  if (!model) return std::unexpected(std::move(model.error()));
  return budgetOf(*model, Claims::kScale);
}

Result<StrainUncertainty> strainsToCome(const Rack& rack, const Channel& channel) {
  auto readings = readingsToCome(rack, channel);
  if (!readings) return std::unexpected(std::move(readings.error()));
  const auto& inputs = *rack.device(channel.device)->profile->inputs;
  StrainReadings strains{std::move(*readings), {}, {}, 0};
  strains.zero.resolution = inputs.resolution;
  strains.zero.stability = inputs.zeroStability;
  const auto zero = zeroUncertainty(rack, channel, {}, strains.zero);
  if (!zero) return std::unexpected(zero.error());
  const Strain level = largestStrain(channel);
  const auto model = modelToCome(rack, channel, strains, {&level, 1});
  if (!model) return std::unexpected(model.error());
  auto found =
      strainUncertainties(*model, {&level, 1}, factorTolerance(rack, channel), zero->secondOrderVariance);
  if (!found) return std::unexpected(std::move(found.error()));
  return found->front();
}

/// Something that somebody could do about a channel; false when it is done already.
struct Remedy {
  const char* what;
  std::function<bool(Rack&, Channel&)> apply;
};

bool measureGauges(Rack& rack, Channel& channel) {
  if (channel.transducer) return false;
  const auto weights = description::armWeights(channel.circuit, channel.poisson);
  bool any = false;
  for (std::size_t arm = 0; arm < weights.size(); ++arm) {
    if (weights[arm] == 0) continue;
    const auto gauge = rack.gaugeOf(channel, arm);
    if (gauge.measured && gauge.resistance.tolerance <= kMeasuredGauge) continue;
    if (!channel.arms[arm]) channel.arms[arm].emplace();
    channel.arms[arm]->resistance = description::Toleranced{gauge.resistance.value, kMeasuredGauge};
    any = true;
  }
  return any;
}

bool certifyShunts(Rack& rack, Channel& channel) {
  bool any = false;
  for (const auto& shunt : channel.shunts) {
    auto& resistor = rack.resistors.at(shunt.resistor);
    const auto known =
        resistor.expandedUncertainty > Fraction() ? resistor.expandedUncertainty : resistor.tolerance;
    if (known <= kCertified) continue;
    resistor.expandedUncertainty = kCertified;
    resistor.coverageFactor = 2;
    any = true;
  }
  return any;
}

bool measureLeads(Rack&, Channel& channel) {
  bool any = false;
  for (auto& [terminal, lead] : channel.leads) {
    if (lead.resistance <= Resistance() ||
        lead.resistance.in(ohm)*lead.tolerance.in(one) <= kMeasuredLead.in(ohm))
      continue;
    lead.tolerance = kMeasuredLead.in(ohm) / lead.resistance.in(ohm)*one;
    any = true;
  }
  return any;
}

bool measureTemperature(Rack&, Channel& channel) {
  bool any = false;
  for (auto& [terminal, lead] : channel.leads) {
    if (lead.temperatureTolerance <= 1.0 * kelvin) continue;
    lead.temperatureTolerance = 1.0 * kelvin;
    any = true;
  }
  return any;
}

bool betterCompletion(Rack& rack, Channel& channel) {
  const auto device = std::find_if(rack.devices.begin(), rack.devices.end(),
                                   [&](const auto& d) { return d.name == channel.device; });
  auto profile = std::make_shared<description::Profile>(*device->profile);
  bool any = false;
  for (auto& offered : profile->inputs->completions) {
    if (!channel.completion || offered.value != *channel.completion || offered.tolerance <= kCertified)
      continue;
    offered.tolerance = kCertified;
    any = true;
  }
  device->profile = profile;
  return any;
}

}  // namespace

Result<Foresight> foresee(const Rack& rack, const Channel& channel) {
  if (channel.shunts.empty()) {
    return fail(ErrorCode::bad_use, "channel " + channel.name + " has no shunt", channel.place.text());
  }
  auto budget = budgetToCome(rack, channel);
  if (!budget) return std::unexpected(std::move(budget.error()));
  Foresight out;
  out.budget = std::move(*budget);
  const auto largest = std::max_element(
      out.budget.lines.begin(), out.budget.lines.end(),
      [](const auto& a, const auto& b) { return a.contribution_percent < b.contribution_percent; });
  if (largest != out.budget.lines.end()) out.largest = largest->quantity;

  if (channel.leadLoss == description::LeadLoss::identified) {
    auto leads = leadFitToCome(rack, channel);
    if (!leads) return std::unexpected(std::move(leads.error()));
    out.leads = identified(*leads);
  }
  auto strains = strainsToCome(rack, channel);
  if (!strains) return std::unexpected(std::move(strains.error()));
  out.atLargest = *strains;

  static const std::vector<Remedy> remedies{
      {"measure each gauge to 0.02 %", measureGauges},
      {"have the shunt resistor certified to 0.01 %", certifyShunts},
      {"measure each lead to 20 mohm", measureLeads},
      {"know the leads' temperature to 1 K", measureTemperature},
      {"use a completion resistor of 0.01 %", betterCompletion},
  };
  double best = kWorthwhile * out.budget.expandedUncertainty_percent;
  for (const Remedy& remedy : remedies) {
    Rack better = rack;
    Channel changed = channel;
    if (!remedy.apply(better, changed)) continue;
    auto then = budgetToCome(better, changed);
    if (!then || then->expandedUncertainty_percent >= best) continue;
    best = then->expandedUncertainty_percent;
    out.advice = Advice{remedy.what, best};
  }
  return out;
}

Result<SecondOpinion> secondOpinion(const Rack& rack, const Channel& channel, const Budget& stated,
                                    Random& random) {
  auto readings = readingsToCome(rack, channel);
  if (!readings) return std::unexpected(std::move(readings.error()));
  metrology::MonteCarloOptions options;
  options.digits = 1;
  options.toleranceShare = 0.2;
  const bool identified = channel.leadLoss == description::LeadLoss::identified;
  auto model = identified ? modelToCome(rack, channel, {std::move(*readings), {}, {}, 0}, {})
                          : scaleModel(rack, channel, *readings);
  if (!model) return std::unexpected(std::move(model.error()));
  auto drawn = metrology::monteCarlo(*model, random, options);
  if (!drawn) return std::unexpected(std::move(drawn.error()));
  SecondOpinion out;
  out.interval = drawn->outputs[identified ? Claims::kScale : 0].interval.symmetric;
  out.trials = drawn->trials;
  const double half = stated.expandedUncertainty_percent;
  const double tolerance = metrology::numericalTolerance(stated.standardUncertainty_percent, options.digits);
  out.agrees = metrology::agreement({-half, half}, out.interval, tolerance).holds();
  return out;
}

}  // namespace shuntwright::calibration
