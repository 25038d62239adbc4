#include "driver/calibration/uncertainty.h"

#include <cmath>
#include <limits>
#include <numbers>

namespace shuntwright::calibration {

using namespace units;
using metrology::Component;
using metrology::coverageHalfWidth;
using metrology::Shape;
using metrology::studentFactor;
using metrology::WeightedDegrees;
using description::Channel;
using description::Rack;
using description::Unbalance;

namespace {

constexpr double kInfinity = std::numeric_limits<double>::infinity();
const char* word(Shape shape) { return shape == Shape::normal ? "normal" : "rectangular"; }

/// ln of the correction's scale for given steps.
Result<double> logScale(const ChannelModel& model, Ratio zero, const std::vector<Ratio>& measured) {
  auto prediction = predictScale(model, zero);
  if (!prediction) return std::unexpected(std::move(prediction.error()));
  return -std::log(std::abs(prediction->slope_per_strain * spanOf(measured, prediction->steps)));
}

/// A standard uncertainty from a rectangular half-width.
double rectangular(double halfWidth) { return halfWidth / std::numbers::sqrt3; }

BudgetLine relativeLine(std::string quantity, Shape shape, double standard_percent, double degrees = kInfinity) {
  BudgetLine line;
  line.quantity = std::move(quantity);
  line.unit = "%";
  line.distribution = word(shape);
  line.standardUncertainty = standard_percent;
  line.degreesOfFreedom = degrees;
  line.sensitivity = 1;
  line.contribution_percent = standard_percent;
  return line;
}

void conclude(Budget& budget) {
  std::vector<Component> components;
  std::vector<WeightedDegrees> degrees;
  double variance = 0;
  for (const auto& line : budget.lines) {
    const double u = line.contribution_percent;
    variance += u * u;
    components.push_back({line.distribution == "normal" ? Shape::normal : Shape::rectangular, u});
    degrees.push_back({u, line.degreesOfFreedom});
  }
  budget.standardUncertainty_percent = std::sqrt(variance);
  budget.effectiveDegreesOfFreedom = metrology::effectiveDegrees(degrees);
  const double student = studentFactor(budget.effectiveDegreesOfFreedom) / studentFactor(kInfinity);
  budget.expandedUncertainty_percent = coverageHalfWidth(components) * student;
  budget.coverageFactor = budget.standardUncertainty_percent > 0
                              ? budget.expandedUncertainty_percent / budget.standardUncertainty_percent
                              : 2;
}

/// What it would cost if the unbalance had another cause than the one taken: half-width, relative.
double costOfCause(const ChannelModel& model, Ratio zero, const std::vector<Ratio>& measured, double nominal) {
  double worst = 0;
  for (const Unbalance cause : {Unbalance::standing_strain, Unbalance::completion}) {
    ChannelModel other = model;
    other.cause = cause;
    if (auto scale = logScale(other, zero, measured)) worst = std::max(worst, std::abs(*scale - nominal));
  }
  return worst;
}

}  // namespace

Result<Budget> scaleBudget(const Rack& rack, const Channel& channel, Ratio zero, const std::vector<Ratio>& measured,
                           const ReadingScatter& scatter) {
  const ChannelModel model = modelWithLeads(rack, channel);
  auto nominal = logScale(model, zero, measured);
  if (!nominal) return std::unexpected(std::move(nominal.error()));
  Budget budget;
  for (const auto& in : inputsOf(rack, channel)) {
    if (in.standardUncertainty <= 0) continue;
    double scale[2];
    for (const int side : {0, 1}) {
      ChannelModel shifted = model;
      in.shift(shifted, (side == 0 ? -1 : 1) * in.standardUncertainty);
      auto value = logScale(shifted, zero, measured);
      if (!value) return std::unexpected(std::move(value.error()));
      scale[side] = *value;
    }
    BudgetLine line;
    line.quantity = in.quantity;
    line.value = in.value;
    line.unit = in.unit;
    line.distribution = word(in.shape);
    line.standardUncertainty = in.standardUncertainty;
    line.degreesOfFreedom = in.degreesOfFreedom;
    line.sensitivity = 100 * (scale[1] - scale[0]) / (2 * in.standardUncertainty);
    line.contribution_percent = std::abs(line.sensitivity) * in.standardUncertainty;
    budget.lines.push_back(std::move(line));
  }
  if (channel.leadLoss == description::LeadLoss::in_span) {
    // The correction is worked out with no leads: what is left of them is the part the steps do not carry.
    if (auto without = logScale(modelOf(rack, channel), zero, measured)) {
      budget.lines.push_back(relativeLine("lead loss not carried by the steps", Shape::rectangular,
                                          100 * rectangular(std::abs(*without - *nominal))));
    }
  }
  if (channel.unbalance == Unbalance::unknown) {
    budget.lines.push_back(relativeLine("cause of unbalance", Shape::rectangular,
                                        100 * rectangular(costOfCause(model, zero, measured, *nominal))));
  }
  budget.lines.push_back(relativeLine("noise and repeats of the steps", Shape::normal, 100 * scatter.stepRelative,
                                      scatter.stepDegrees));
  const double step = std::abs(scatter.smallestStep.in(volt_per_volt));
  if (step > 0) {
    // Two readings a step, each off by at most half a digit.
    const double digit = rectangular(0.5 * scatter.resolution.in(volt_per_volt)) * std::numbers::sqrt2;
    budget.lines.push_back(relativeLine("resolution of the readings", Shape::rectangular, 100 * digit / step));
  }
  conclude(budget);
  return budget;
}

Result<Strain> zeroUncertainty(const Rack& rack, const Channel& channel, Ratio zero, const ZeroScatter& scatter) {
  const ChannelModel nominal = modelWithLeads(rack, channel);
  auto prediction = predictScale(nominal, zero);
  if (!prediction) return std::unexpected(std::move(prediction.error()));
  const double slope = std::abs(prediction->slope_per_strain);
  double variance = 0;
  const auto addRatio = [&](double u_V_per_V) { variance += (u_V_per_V / slope) * (u_V_per_V / slope); };
  addRatio(scatter.standardUncertainty.in(volt_per_volt));
  addRatio(rectangular(0.5 * scatter.resolution.in(volt_per_volt)));
  addRatio(rectangular(scatter.returnSpread.in(volt_per_volt)));
  addRatio(rectangular(scatter.stability.in(volt_per_volt)));

  // Leads that warm: the shift by itself, and together with each lead being off its stated value.
  const auto zeroShift = [&](const ChannelModel& model) {
    const auto then = bridge::ratio(model.atCalibration, {});
    const auto later = bridge::ratio(model.inTest, {});
    return then && later ? (*later - *then).in(volt_per_volt) : 0.0;
  };
  const auto inputs = inputsOf(rack, channel);
  for (const auto& warming : inputs) {
    if (warming.quantity != "lead temperature, change until the test") continue;
    ChannelModel warm = nominal;
    const double change = scatter.leadsShare * warming.standardUncertainty;
    warming.shift(warm, change);
    const double alone = zeroShift(warm);
    addRatio(alone);
    for (const auto& lead : inputs) {
      if (!lead.quantity.starts_with("lead ") || lead.unit != "ohm") continue;
      ChannelModel both = nominal;
      lead.shift(both, lead.standardUncertainty);
      // A longer lead warms by more ohms.
      const double longer = lead.value > 0 ? 1 + lead.standardUncertainty / lead.value : 1;
      ChannelModel bothWarm = both;
      warming.shift(bothWarm, change);
      for (std::size_t t = 0; t < both.inTest.leads.size(); ++t) {
        const auto warmedBy = bothWarm.inTest.leads[t] - both.inTest.leads[t];
        const bool own = both.atCalibration.leads[t] != nominal.atCalibration.leads[t];
        if (own) bothWarm.inTest.leads[t] = both.inTest.leads[t] + warmedBy * longer;
      }
      addRatio(zeroShift(bothWarm) - alone);
    }
  }
  return std::sqrt(variance) * strain;
}

}  // namespace shuntwright::calibration
