#include "driver/bridge/shunt_step.h"

#include <cmath>

#include "driver/bridge/rational_map.h"
#include "driver/bridge/state.h"

namespace shuntwright::bridge {

namespace {

constexpr double kCarriesWithin = 0.02;

// Signal leads into an input of 1 Gohm lose 2e-7 % per ohm: nothing that a step could carry or not.
constexpr double kNoLoss_percent_per_ohm = 1e-5;

// Steps below the rounding of a ratio are no steps: a shunt across the excitation itself, say.
constexpr double kNoStep_V_per_V = 1e-15;

/// Change per ohm in percent of the whole; rounding about zero is zero.
double percentPerOhm(double perOhm, double whole) {
  const double percent = 100 * perOhm / whole;
  return std::abs(percent) < 1e-9 ? 0.0 : percent;
}

}  // namespace

Result<units::Ratio> stepOf(const Circuit& circuit, units::Strain standing, const ShuntPath& path) {
  const auto before = ratio(circuit, standing);
  if (!before) return before;
  const auto after = ratio(circuit, standing, {&path, 1});
  if (!after) return after;
  return *after - *before;
}

Result<ShuntStep> predictStep(const Circuit& circuit, units::Strain standing, const ShuntPath& path) {
  const double e = standing.in(units::strain);
  const auto before = stateWithLeadDerivatives(circuit, e);
  if (!before) return std::unexpected(before.error());
  const auto after = stateWithLeadDerivatives(circuit, e, {&path, 1});
  if (!after) return std::unexpected(after.error());

  ShuntStep out;
  const double step = after->ratio_V_per_V - before->ratio_V_per_V;
  out.before = before->ratio_V_per_V * units::volt_per_volt;
  out.step = step * units::volt_per_volt;
  if (before->slope != 0) out.strainPercentPerOhm = percentPerOhm(before->slopePerOhm, before->slope);
  if (std::abs(step) < kNoStep_V_per_V) return out;

  out.stepPercentPerOhm = percentPerOhm(after->ratioPerOhm - before->ratioPerOhm, step);
  out.carriesLeadLoss = std::abs(out.strainPercentPerOhm) > kNoLoss_percent_per_ohm &&
                        std::abs(out.stepPercentPerOhm - out.strainPercentPerOhm) <=
                            kCarriesWithin * std::abs(out.strainPercentPerOhm);
  const auto equivalent = strainOf(circuit, after->ratio_V_per_V * units::volt_per_volt);
  if (!equivalent) return std::unexpected(equivalent.error());
  out.simulated = *equivalent - standing;
  return out;
}

}  // namespace shuntwright::bridge
