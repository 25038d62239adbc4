#include "driver/calibration/uncertainty.h"

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

/// ln of the correction's scale for given steps.
Result<double> logScale(const ChannelModel& model, const ScaleReadings& readings) {
  auto prediction = predictScale(model, readings.zero);
  if (!prediction) return std::unexpected(std::move(prediction.error()));
  const double span = spanOf(readings.measured, prediction->steps, readings.weights);
  return -std::log(std::abs(prediction->slope_per_strain * span));
}

/// What it would cost if the unbalance had another cause than the one taken: half-width, relative.
double costOfCause(const ChannelModel& model, const ScaleReadings& readings, double nominal) {
  double worst = 0;
  for (const Unbalance cause : {Unbalance::standing_strain, Unbalance::completion}) {
    ChannelModel other = model;
    other.cause = cause;
    if (auto scale = logScale(other, readings)) worst = std::max(worst, std::abs(*scale - nominal));
  }
  return worst;
}

}  // namespace

Result<metrology::Model> scaleModel(const Rack& rack, const Channel& channel, const ScaleReadings& readings) {
  const ReadingScatter& scatter = readings.scatter;
  const ChannelModel nominalModel = modelWithLeads(rack, channel);
  auto nominal = logScale(nominalModel, readings);
  if (!nominal) return std::unexpected(std::move(nominal.error()));
  MeasurementInputs inputs(nominalModel);
  for (auto& in : inputsOf(rack, channel)) inputs.add(std::move(in));
  const auto addRelative = [&](const char* quantity, const metrology::Distribution& inPercent) {
    inputs.addToOutput(quantity, "%", inPercent);
  };
  if (channel.leadLoss == description::LeadLoss::in_span) {
    // The correction is worked out with no leads: what is left of them is the part the steps do not carry.
    if (auto without = logScale(modelOf(rack, channel), readings)) {
      addRelative("lead loss not carried by the steps", rectangular(0, 100 * std::abs(*without - *nominal)));
    }
  }
  if (channel.unbalance == Unbalance::unknown) {
    const double cost = costOfCause(nominalModel, readings, *nominal);
    addRelative("cause of unbalance", rectangular(0, 100 * cost));
  }
  addRelative("noise and repeats of the steps", normal(0, 100 * scatter.stepRelative, scatter.stepDegrees));
  const double step = std::abs(scatter.smallestStep.in(volt_per_volt));
  if (step > 0) {
    // Two readings a step, each off by at most half a digit: together a triangle of a whole one.
    const double digit = scatter.resolution.in(volt_per_volt);
    addRelative("resolution of the readings", triangular(0, 100 * digit / step));
  }
  return std::move(inputs).model(
      1, [readings, nominal = *nominal](const ChannelModel& model, std::span<double> y) -> Result<void> {
        auto scale = logScale(model, readings);
        if (!scale) return std::unexpected(std::move(scale.error()));
        y[0] = 100 * (*scale - nominal);
        return {};
      });
}

Result<metrology::Model> jointScaleModel(const Rack& rack, std::span<const ChannelScale> channels) {
  std::vector<metrology::NamedModel> parts;
  for (const auto& [channel, readings] : channels) {
    auto model = scaleModel(rack, *channel, readings);
    if (!model) return std::unexpected(std::move(model.error()).wrap("channel " + channel->name));
    parts.push_back({channel->name, std::move(*model)});
  }
  return metrology::join(std::move(parts));
}

Result<Budget> scaleBudget(const Rack& rack, const Channel& channel, const ScaleReadings& readings) {
  auto model = scaleModel(rack, channel, readings);
  if (!model) return std::unexpected(std::move(model.error()));
  return budgetOf(*model, 0);
}

Result<Budget> budgetOf(const metrology::Model& model, std::size_t output) {
  auto propagated = metrology::firstOrder(model);
  if (!propagated) return std::unexpected(std::move(propagated.error()));
  const metrology::Estimate& scale = propagated->outputs[output];
  Budget budget;
  for (std::size_t i = 0; i < model.inputs.size(); ++i) {
    const auto& [quantity, unit, distribution, source] = model.inputs[i];
    if (scale.contributions[i].uncertainty <= 0) continue;  // of another output
    BudgetLine line;
    line.quantity = quantity;
    line.value = distribution.mean;
    line.unit = unit;
    line.distribution = metrology::name(distribution.shape);
    line.standardUncertainty = distribution.standardUncertainty;
    line.degreesOfFreedom = distribution.degreesOfFreedom;
    line.sensitivity = scale.contributions[i].sensitivity;
    line.contribution_percent = scale.contributions[i].uncertainty;
    budget.lines.push_back(std::move(line));
  }
  budget.standardUncertainty_percent = scale.standardUncertainty;
  budget.effectiveDegreesOfFreedom = scale.degreesOfFreedom;
  budget.expandedUncertainty_percent = metrology::shapedHalfWidth(model, scale);
  budget.coverageFactor =
      scale.standardUncertainty > 0 ? budget.expandedUncertainty_percent / scale.standardUncertainty : 2;
  return budget;
}

Result<metrology::MonteCarloResult> scaleMonteCarlo(const Rack& rack, const Channel& channel,
                                                    const ScaleReadings& readings, Random& random,
                                                    const metrology::MonteCarloOptions& options) {
  auto model = scaleModel(rack, channel, readings);
  if (!model) return std::unexpected(std::move(model.error()));
  return metrology::monteCarlo(*model, random, options);
}

Result<metrology::Model> zeroModel(const Rack& rack, const Channel& channel, Ratio zero,
                                   const ZeroScatter& scatter) {
  const ChannelModel nominal = modelWithLeads(rack, channel);
  auto prediction = predictScale(nominal, zero);
  if (!prediction) return std::unexpected(std::move(prediction.error()));
  const double slope = std::abs(prediction->slope_per_strain);
  MeasurementInputs inputs(nominal);
  // Of the circuit only what changes until the test moves the zero: leads that warm, by more where they are
  // longer.
  for (auto& in : inputsOf(rack, channel)) {
    if (!in.input.quantity.starts_with("lead ")) continue;
    if (in.input.quantity == kLeadsWarming) in.input.distribution.standardUncertainty *= scatter.leadsShare;
    inputs.add(std::move(in));
  }
  const auto strainOf = [slope](Ratio r) { return r.in(volt_per_volt) / slope; };
  inputs.addToOutput("noise of the zero reading", "m/m", normal(0, strainOf(scatter.standardUncertainty)));
  inputs.addToOutput("resolution of the zero reading", "m/m",
                     rectangular(0, 0.5 * strainOf(scatter.resolution)));
  inputs.addToOutput("zero return", "m/m", rectangular(0, strainOf(scatter.returnSpread)));
  inputs.addToOutput("stability of the amplifier", "m/m", rectangular(0, strainOf(scatter.stability)));
  return std::move(inputs).model(1, [slope](const ChannelModel& model, std::span<double> y) -> Result<void> {
    const auto then = bridge::ratio(model.atCalibration, {});
    if (!then) return std::unexpected(then.error());
    const auto later = bridge::ratio(model.inTest, {});
    if (!later) return std::unexpected(later.error());
    y[0] = (*later - *then).in(volt_per_volt) / slope;
    return {};
  });
}

Result<ZeroUncertainty> zeroUncertainty(const Rack& rack, const Channel& channel, Ratio zero,
                                        const ZeroScatter& scatter) {
  auto model = zeroModel(rack, channel, zero, scatter);
  if (!model) return std::unexpected(std::move(model.error()));
  metrology::FirstOrderOptions options;
  options.secondOrder = true;
  auto propagated = metrology::firstOrder(*model, options);
  if (!propagated) return std::unexpected(std::move(propagated.error()));
  const metrology::Estimate& zeroes = propagated->outputs.front();
  return ZeroUncertainty{zeroes.standardUncertainty * strain, zeroes.secondOrderVariance};
}

}  // namespace shuntwright::calibration
