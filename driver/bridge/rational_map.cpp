#include "driver/bridge/rational_map.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "driver/bridge/state.h"

namespace shuntwright::bridge {

namespace {

// Outer states at the Chebyshev points of the range: where r is not quite a Moebius function of the strain,
// this spreads the error evenly; where it is, any three states give the same map.
constexpr double kOuterState = 0.8660254037844386;
constexpr int kGrid = 400;

}  // namespace

RationalMap RationalMap::afterAmplifier(double span, double offset) const {
  const double scale = span - w * offset;
  return {.p = p / scale, .q = (q * span - p * offset) / scale, .w = w / scale};
}

RationalMap RationalMap::zeroedAt(double ratio_V_per_V) const {
  const double slope = p - strainAt(ratio_V_per_V) * w;
  return {.p = slope, .q = -slope * ratio_V_per_V, .w = w};
}

Result<FittedMap> mapOf(const Circuit& circuit, units::Strain centre, units::Strain range) {
  const double e0 = centre.in(units::strain);
  const double width = range.in(units::strain);
  if (!(width > 0)) {
    return fail(ErrorCode::bad_use,
                fmt::format("the range of a map is {:.6g} microstrain; it is more than 0", width * 1e6));
  }
  const double e1 = -kOuterState * width, e2 = kOuterState * width;  // about the centre
  const auto at = [&](double strain) { return ratio(circuit, strain * units::strain); };
  const auto r0 = at(e0), low = at(e0 + e1), high = at(e0 + e2);
  for (const auto* r : {&r0, &low, &high}) {
    if (!*r) return std::unexpected(r->error());
  }
  const double ratio0 = r0->in(units::volt_per_volt);
  const double rho1 = (*low - *r0).in(units::volt_per_volt);
  const double rho2 = (*high - *r0).in(units::volt_per_volt);
  if (!(rho1 * rho2 < 0)) {
    return fail(ErrorCode::bad_use,
                "the circuit's ratio does not follow the strain: no map from one to the other", {},
                "check which arms are gauges, and their gauge factor");
  }
  // About the centre: e = P rho / (1 + W rho), so P - W e = e / rho at the two outer states.
  const double s1 = e1 / rho1, s2 = e2 / rho2;
  const double w = (s2 - s1) / (e1 - e2);
  const double p = s1 + w * e1;
  const double c = 1 - w * ratio0;

  FittedMap out;
  out.map = {.p = (e0 * w + p) / c, .q = e0 - p * ratio0 / c, .w = w / c};
  out.range = range;
  double worst = 0;
  for (int i = 0; i <= kGrid; ++i) {
    const double e = e0 + width * (2.0 * i / kGrid - 1);
    const auto r = at(e);
    if (!r) return std::unexpected(r.error());
    worst = std::max(worst, std::abs(out.map.strainAt(r->in(units::volt_per_volt)) - e));
  }
  out.worstError = worst * units::strain;
  return out;
}

Result<units::Strain> strainOf(const Circuit& circuit, units::Ratio wanted) {
  const double target = wanted.in(units::volt_per_volt);
  const double limit = searchRange(circuit);
  const auto low = stateOf(circuit, -limit), high = stateOf(circuit, limit);
  if (!low) return std::unexpected(low.error());
  if (!high) return std::unexpected(high.error());
  const bool rising = high->ratio_V_per_V > low->ratio_V_per_V;
  const double least = rising ? low->ratio_V_per_V : high->ratio_V_per_V;
  const double most = rising ? high->ratio_V_per_V : low->ratio_V_per_V;
  if (!(target >= least && target <= most)) {
    return fail(
        ErrorCode::bad_use,
        fmt::format(
            "no strain within +-{:.0f} microstrain gives {:.6g} mV/V: the circuit goes from {:.6g} to {:.6g}",
            limit * 1e6, target * 1e3, least * 1e3, most * 1e3));
  }
  // Newton's method, kept inside a bracket that shrinks with every step.
  double below = -limit, above = limit, e = 0;
  for (int i = 0; i < 100; ++i) {
    const auto state = stateOf(circuit, e);
    if (!state) return std::unexpected(state.error());
    const double excess = state->ratio_V_per_V - target;
    if (excess == 0) break;
    ((excess > 0) == rising ? above : below) = e;
    double next = e - excess / state->slope;
    if (!(next > below && next < above)) next = below + (above - below) / 2;
    const double moved = std::abs(next - e);
    e = next;
    if (moved <= 1e-16 * limit + 2e-16 * std::abs(e)) break;
  }
  return e * units::strain;
}

}  // namespace shuntwright::bridge
