#include "driver/calibration/claims.h"

#include <cmath>

namespace shuntwright::calibration {

using namespace units;

namespace {

/// Reading over the span when so much strain has been added.
Result<double> ratioAt(const Meaning& meaning, double strainValue) {
  auto r = bridge::ratio(meaning.inTest.circuit, meaning.inTest.standing + strainValue * strain);
  if (!r) return std::unexpected(std::move(r.error()));
  return r->in(volt_per_volt);
}

Result<double> slopeOf(const Meaning& meaning) {
  constexpr double kHalf = 1e-4;
  const auto up = ratioAt(meaning, kHalf), down = ratioAt(meaning, -kHalf);
  if (!up) return up;
  if (!down) return down;
  return (*up - *down) / (2 * kHalf);
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

}  // namespace

Result<Meaning> meaningOf(const ChannelModel& model, double span, Ratio zero) {
  auto point = explain(model.atCalibration, zero, model.cause);
  if (!point) return std::unexpected(std::move(point.error()));
  return Meaning{span, moved(*point, model.atCalibration, model.inTest)};
}

Result<Claims> Claims::of(const Meaning& nominal, std::span<const Strain> levels) {
  Claims out;
  out.span_ = nominal.span;
  const auto slope = slopeOf(nominal);
  if (!slope) return std::unexpected(slope.error());
  out.slope_ = *slope;
  for (const Strain level : levels) {
    const double e = level.in(strain);
    const auto r = ratioAt(nominal, e);
    if (!r) return std::unexpected(r.error());
    out.levels_.push_back({e, *r});
  }
  return out;
}

Result<void> Claims::evaluate(const Meaning& other, std::span<double> y) const {
  const auto slope = slopeOf(other);
  if (!slope) return std::unexpected(slope.error());
  y[kSpan] = 100 * (other.span / span_ - 1);
  y[kScale] = -100 * std::log(std::abs(*slope * other.span / (slope_ * span_)));
  for (std::size_t k = 0; k < levels_.size(); ++k) {
    const auto e = strainNear(other, levels_[k].ratio * span_ / other.span, levels_[k].strain, slope_);
    if (!e) return std::unexpected(e.error());
    y[kStrains + k] = *e - levels_[k].strain;
  }
  return {};
}

}  // namespace shuntwright::calibration
