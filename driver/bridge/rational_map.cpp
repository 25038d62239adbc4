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

// Chebyshev points for the bend. None of them is near the centre, where it vanishes and would be divided by
// 0.
constexpr std::array<double, 4> kBendStates{-0.9238795325112867, -0.3826834323650898, 0.3826834323650898,
                                            0.9238795325112867};

// What a ratio may be off by rounding alone: no reason to bend a map.
constexpr double kRounding_V_per_V = 4e-15;

using Polynomial = std::array<double, 6>;  // by rising powers

Polynomial polynomialOf(const RationalMap& map) {
  return {0, 1, map.bend[0], map.bend[1], map.bend[2], map.bend[3]};
}

double valueOf(const Polynomial& c, double x) {
  double value = 0;
  for (std::size_t k = c.size(); k-- > 0;) value = value * x + c[k];
  return value;
}

/// The polynomial of x + by, by repeated division.
Polynomial shifted(Polynomial c, double by) {
  for (std::size_t k = 0; k + 1 < c.size(); ++k) {
    for (std::size_t i = c.size() - 1; i-- > k;) c[i] += by * c[i + 1];
  }
  return c;
}

/// The same map with its strain counted from where u has this value: u shrinks such that its own slope
/// stays 1.
RationalMap countedFrom(const RationalMap& map, double u) {
  const Polynomial c = shifted(polynomialOf(map), u);
  const double slope = c[1];
  RationalMap out{.p = slope * (map.p - u * map.w), .q = slope * (map.q - u), .w = map.w};
  double power = slope;
  for (std::size_t k = 0; k < out.bend.size(); ++k) {
    power *= slope;
    out.bend[k] = c[k + 2] / power;
  }
  return out;
}

double moebius(const RationalMap& map, double ratio_V_per_V) {
  return (map.p * ratio_V_per_V + map.q) / (1 + map.w * ratio_V_per_V);
}

}  // namespace

double RationalMap::strainAt(double ratio_V_per_V) const {
  const double u = moebius(*this, ratio_V_per_V);
  return u + u * u * (bend[0] + u * (bend[1] + u * (bend[2] + u * bend[3])));
}

RationalMap RationalMap::afterAmplifier(double span, double offset) const {
  const double scale = span - w * offset;
  return {.p = p / scale, .q = (q * span - p * offset) / scale, .w = w / scale, .bend = bend};
}

RationalMap RationalMap::zeroedAt(double ratio_V_per_V) const {
  RationalMap out = countedFrom(*this, moebius(*this, ratio_V_per_V));
  out.q = -out.p * ratio_V_per_V;  // 0 there to the last digit
  return out;
}

namespace {

/// Cubic through four points, by rising powers.
std::array<double, 4> cubicThrough(const std::array<double, 4>& x, std::array<double, 4> y) {
  for (std::size_t order = 1; order < 4; ++order) {  // divided differences
    for (std::size_t i = 3; i >= order; --i) y[i] = (y[i] - y[i - 1]) / (x[i] - x[i - order]);
  }
  std::array<double, 4> c{y[3], 0, 0, 0};
  for (std::size_t k = 3; k-- > 0;) {  // times (x - x_k), plus y_k
    for (std::size_t i = 3; i > 0; --i) c[i] = c[i - 1] - x[k] * c[i];
    c[0] = y[k] - x[k] * c[0];
  }
  return c;
}

/// e = slope rho / (1 + w rho) with rho from the centre's ratio.
RationalMap centred(double slope, double w, double ratio0) {
  const double c = 1 - w * ratio0;
  return {.p = slope / c, .q = -slope * ratio0 / c, .w = w / c};
}

/// u of the Moebius part at the states for the bend; `misses` becomes what it is short of the strain there.
Result<std::array<double, 4>> missesOf(const Circuit& circuit, const RationalMap& map, double centre,
                                       double width, std::array<double, 4>& misses) {
  std::array<double, 4> u{};
  for (std::size_t k = 0; k < 4; ++k) {
    const double e = kBendStates[k] * width;
    const auto r = ratio(circuit, (centre + e) * units::strain);
    if (!r) return std::unexpected(r.error());
    u[k] = moebius(map, r->in(units::volt_per_volt));
    misses[k] = e - u[k];
  }
  return u;
}

}  // namespace

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
  RationalMap map = centred(s1 + w * e1, w, ratio0);
  std::array<double, 4> left{};
  if (auto misses = missesOf(circuit, map, e0, width, left); !misses) return std::unexpected(misses.error());
  if (std::ranges::any_of(left, [&](double e) { return std::abs(e) > kRounding_V_per_V * std::abs(s1); })) {
    // Bent: the Moebius part keeps the exact slope at the centre, so that what it leaves begins with u^2.
    const auto state = stateOf(circuit, e0);
    if (!state) return std::unexpected(state.error());
    const double slope = 1 / state->slope;
    map = centred(slope, 0.5 * ((slope - s1) / e1 + (slope - s2) / e2), ratio0);
    const auto u = missesOf(circuit, map, e0, width, left);
    if (!u) return std::unexpected(u.error());
    for (std::size_t k = 0; k < 4; ++k) left[k] /= (*u)[k] * (*u)[k];
    map.bend = cubicThrough(*u, left);
  }

  FittedMap out;
  out.range = range;
  out.map = map;
  if (map.isMoebius()) {
    out.map.p += e0 * map.w;
    out.map.q += e0;
  } else if (e0 != 0) {
    // Where strain is 0, by Newton's method from where it is in the Moebius part.
    const Polynomial polynomial = polynomialOf(map);
    double at0 = -e0;
    for (int i = 0; i < 20; ++i) {
      at0 -= (valueOf(polynomial, at0) + e0) / shifted(polynomial, at0)[1];
    }
    out.map = countedFrom(map, at0);
  }
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
