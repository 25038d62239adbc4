#include "driver/calibration/lead_fit.h"

#include <algorithm>
#include <cmath>

#include "driver/bridge/shunt_step.h"
#include "driver/metrology/least_squares.h"

namespace shuntwright::calibration {

using namespace units;
using description::Terminal;
using description::Unbalance;

namespace {

// So wide that they decide nothing: see LeadFit.
constexpr double kSpanUnknown = 0.5;
// Standing strain where nothing rules it out; far beyond what is left in a specimen (common practice, no
// source).
constexpr double kStrainUnknown = 5e-3;
constexpr double kSpanStep = 1e-4, kStep = 1e-3;  // for differences, in t
constexpr double kSmallGain = 1e-7;
constexpr int kRounds = 60, kQuickRounds = 6;

double ratioIn(Ratio r) {
  return r.in(volt_per_volt);
}

}  // namespace

std::size_t LeadFit::deviationAt(Terminal lead) const {
  std::size_t at = firstDeviation();
  for (const auto& [terminal, share] : readings_.inequality) {
    if (terminal == lead) break;
    ++at;
  }
  return at;
}

double LeadFit::shareOf(Terminal lead) const {
  return shares_.at(lead);
}

double LeadFit::unitOf(std::size_t parameter) const {
  return rows_[dataRows() + parameter].distribution.standardUncertainty;
}

double LeadFit::valueOf(std::size_t parameter, const std::vector<double>& t) const {
  return rows_[dataRows() + parameter].distribution.mean + unitOf(parameter) * t[parameter];
}

LeadFit::Situation LeadFit::situationAt(const std::vector<double>& t) const {
  Situation out{readings_.nominal, {}, valueOf(kSpan, t)};
  if (strains_) out.standing = valueOf(2, t) * strain;
  for (std::size_t i = 0; i < readings_.known.size(); ++i) {
    readings_.known[i].shift(out.model, unitOf(firstKnown_ + i) * t[firstKnown_ + i]);
  }
  const double common = std::max(0.0, valueOf(kCommon, t));
  std::size_t deviation = firstDeviation();
  for (const auto& [terminal, share] : readings_.inequality) {
    const Resistance own = std::max(0.0, common * shareOf(terminal) * (1 + valueOf(deviation++, t))) * ohm;
    out.model.atCalibration.lead(terminal) = out.model.inTest.lead(terminal) = own;
  }
  return out;
}

Result<std::vector<double>> LeadFit::predicted(const std::vector<double>& t) const {
  const Situation at = situationAt(t);
  const auto before = bridge::ratio(at.model.atCalibration, at.standing);
  if (!before) return std::unexpected(before.error());
  std::vector<double> out;
  for (const std::size_t k : measured_) {
    const auto after = bridge::ratio(at.model.atCalibration, at.standing, std::span(&at.model.shunts[k], 1));
    if (!after) return std::unexpected(after.error());
    out.push_back(at.span * ratioIn(*after - *before));
  }
  if (readings_.zero) out.push_back(at.span * ratioIn(*before));
  return out;
}

Result<metrology::Matrix> LeadFit::slopes(const std::vector<double>& t) const {
  metrology::Matrix out(dataRows(), parameters());
  for (std::size_t j = 0; j < parameters(); ++j) {
    std::vector<double> up = t, down = t;
    const double step = j == kSpan || j == kCommon ? kSpanStep : kStep;
    up[j] += step;
    // No lead has less than nothing.
    down[j] -= j == kCommon ? std::min(step, std::max(0.0, valueOf(kCommon, t) / unitOf(kCommon))) : step;
    const auto high = predicted(up), low = predicted(down);
    if (!high) return std::unexpected(high.error());
    if (!low) return std::unexpected(low.error());
    for (std::size_t r = 0; r < dataRows(); ++r) out(r, j) = ((*high)[r] - (*low)[r]) / (up[j] - down[j]);
  }
  return out;
}

Result<void> LeadFit::setUp() {
  auto& in = readings_;
  const std::size_t count = in.nominal.shunts.size();
  if (in.steps.size() != count || in.noise.size() != count || in.inequality.empty()) {
    return fail(ErrorCode::bad_use, "to identify leads takes a step and its noise for each shunt, and leads");
  }
  for (std::size_t k = 0; k < count; ++k) {
    if (std::isfinite(ratioIn(in.steps[k]))) measured_.push_back(k);
  }
  if (measured_.empty())
    return fail(ErrorCode::bad_use, "no step was measured, so nothing tells of the leads");
  std::erase_if(in.known,
                [](const auto& known) { return !(known.input.distribution.standardUncertainty > 0); });
  strains_ = in.nominal.cause == Unbalance::unknown || in.nominal.cause == Unbalance::standing_strain;

  const auto data = [&](std::string what, Ratio value, Ratio noise) {
    rows_.push_back(
        {std::move(what), "V/V", metrology::normal(ratioIn(value), ratioIn(noise), in.noiseDegrees)});
  };
  for (const std::size_t k : measured_) {
    data("noise of the step of shunt " + std::to_string(k + 1), in.steps[k], in.noise[k]);
  }
  if (in.zero) data("noise of the zero reading", *in.zero, in.zeroNoise);
  if (!std::ranges::all_of(rows_, [](const auto& row) { return row.distribution.standardUncertainty > 0; })) {
    return fail(ErrorCode::bad_use, "the noise of a step must be above 0", {},
                "count at least the resolution of the readings");
  }
  double start_ohm = 0;
  for (const auto& [terminal, share] : in.inequality)
    start_ohm += in.nominal.atCalibration.lead(terminal).in(ohm);
  start_ohm /= static_cast<double>(in.inequality.size());
  for (const auto& [terminal, share] : in.inequality) {
    shares_[terminal] = start_ohm > 0 ? in.nominal.atCalibration.lead(terminal).in(ohm) / start_ohm : 1;
  }
  const std::size_t first = rows_.size();
  rows_.push_back({"common lead resistance", "ohm",
                   metrology::normal(start_ohm, in.nominal.atCalibration.arms[0].resistance.in(ohm))});
  rows_.push_back({"span", "", metrology::normal(1, kSpanUnknown)});
  if (strains_) rows_.push_back({"standing strain", "m/m", metrology::normal(0, kStrainUnknown)});
  for (const auto& [terminal, share] : in.inequality) {
    rows_.push_back({"lead " + std::string(description::name(terminal)) + " against the others", "",
                     metrology::rectangular(0, std::max(share.in(one), 1e-9))});
  }
  firstKnown_ = rows_.size() - first;
  for (const auto& known : in.known) rows_.push_back(known.input);
  estimate_.assign(rows_.size() - first, 0.0);
  return {};
}

Result<double> LeadFit::chiSquaredAt(const std::vector<double>& t) const {
  const auto now = predicted(t);
  if (!now) return std::unexpected(now.error());
  double sum = 0;
  for (std::size_t r = 0; r < dataRows(); ++r) {
    const auto& row = rows_[r].distribution;
    sum += std::pow((row.mean - (*now)[r]) / row.standardUncertainty, 2);
  }
  for (const double own : t) sum += own * own;
  return sum;
}

/// As much of a step as makes the fit no worse; none when no part of it does.
Result<LeadFit::Move> LeadFit::moved(const std::vector<double>& by) const {
  constexpr int kHalvings = 20;
  constexpr double kRounding = 1e-9;
  double share = 1;
  for (int half = 0; half < kHalvings; ++half, share /= 2) {
    std::vector<double> next = estimate_;
    for (std::size_t j = 0; j < next.size(); ++j) next[j] += share * by[j];
    // No lead has less than nothing, no amplifier a tenth or ten times its span.
    next[kCommon] = std::max(next[kCommon], -rows_[dataRows()].distribution.mean / unitOf(kCommon));
    next[kSpan] = std::clamp(next[kSpan], -0.9 / kSpanUnknown, 9 / kSpanUnknown);
    const auto there = chiSquaredAt(next);
    if (!there) return std::unexpected(there.error());
    if (*there <= chiSquared_ * (1 + kRounding) + kRounding) return Move{std::move(next), *there};
  }
  return Move{estimate_, chiSquared_};
}

Result<void> LeadFit::search() {
  const std::size_t data = dataRows(), count = parameters();
  metrology::ObservationErrors errors;
  for (std::size_t r = 0; r < data; ++r)
    errors.uncertainties.push_back(rows_[r].distribution.standardUncertainty);
  errors.uncertainties.resize(data + count, 1.0);
  const auto start = chiSquaredAt(estimate_);
  if (!start) return std::unexpected(start.error());
  chiSquared_ = *start;
  for (int round = 0; round < kRounds; ++round) {
    const auto now = predicted(estimate_);
    if (!now) return std::unexpected(now.error());
    const auto slope = slopes(estimate_);
    if (!slope) return std::unexpected(slope.error());
    metrology::Matrix design(data + count, count);
    std::vector<double> observed;
    for (std::size_t r = 0; r < data; ++r) {
      for (std::size_t j = 0; j < count; ++j) design(r, j) = (*slope)(r, j);
      observed.push_back(rows_[r].distribution.mean - (*now)[r]);
    }
    for (std::size_t j = 0; j < count; ++j) {
      design(data + j, j) = 1;
      observed.push_back(-estimate_[j]);
    }
    const auto fit = metrology::fitLinear(design, observed, errors);
    if (!fit) return std::unexpected(fit.error());
    const auto next = moved(fit->parameters);
    if (!next) return std::unexpected(next.error());
    double by = 0;
    for (std::size_t j = 0; j < count; ++j) {
      by = std::max(by, std::abs(next->to[j] - estimate_[j]) / fit->standardUncertainty(j));
    }
    const bool better = chiSquared_ - next->chiSquared > kSmallGain * (1 + next->chiSquared);
    estimate_ = next->to;
    chiSquared_ = next->chiSquared;
    // Steps that do not fit at all creep towards the best there is.
    if (by > 1e-4 && better) continue;
    covariance_ = fit->covariance;
    gain_ = metrology::Matrix(count, data + count);  // C J^T / u^2
    for (std::size_t i = 0; i < count; ++i) {
      for (std::size_t r = 0; r < data + count; ++r) {
        double sum = 0;
        for (std::size_t j = 0; j < count; ++j) sum += covariance_(i, j) * design(r, j);
        gain_(i, r) = sum / errors.uncertainties[r];
      }
    }
    return {};
  }
  return fail(ErrorCode::bad_use, "the search for the lead resistance does not settle", {},
              "check the wiring: no leads and no span explain these steps");
}

Result<LeadFit> LeadFit::of(LeadReadings readings) {
  LeadFit out;
  out.readings_ = std::move(readings);
  if (auto done = out.setUp(); !done) return std::unexpected(std::move(done.error()));
  if (auto done = out.search(); !done) return std::unexpected(std::move(done.error()));
  return out;
}

Result<std::vector<double>> LeadFit::estimateFor(std::span<const double> observed) const {
  std::vector<double> t = estimate_, known(parameters());
  for (std::size_t j = 0; j < parameters(); ++j) {
    known[j] = (observed[dataRows() + j] - rows_[dataRows() + j].distribution.mean) / unitOf(j);
  }
  for (int round = 0; round < kQuickRounds; ++round) {
    const auto now = predicted(t);
    if (!now) return std::unexpected(now.error());
    std::vector<double> off;  // in standard uncertainties of each row
    for (std::size_t r = 0; r < dataRows(); ++r) {
      off.push_back((observed[r] - (*now)[r]) / rows_[r].distribution.standardUncertainty);
    }
    for (std::size_t j = 0; j < parameters(); ++j) off.push_back(known[j] - t[j]);
    double moved = 0;
    for (std::size_t j = 0; j < parameters(); ++j) {
      double by = 0;
      for (std::size_t r = 0; r < off.size(); ++r) by += gain_(j, r) * off[r];
      t[j] += by;
      moved = std::max(moved, std::abs(by));
    }
    if (moved < 1e-6) break;
  }
  return t;
}

Result<std::vector<double>> LeadFit::slopesOfStep(std::size_t shunt, const bridge::ShuntPath& path) const {
  const auto stepAt = [&](const std::vector<double>& t) -> Result<double> {
    const Situation at = situationAt(t);
    bridge::ShuntPath there = path;
    there.resistance = at.model.shunts[shunt].resistance;
    const auto step = bridge::stepOf(at.model.atCalibration, at.standing, there);
    if (!step) return std::unexpected(step.error());
    return at.span * ratioIn(*step);
  };
  const auto low = stepAt(estimate_);
  if (!low) return std::unexpected(low.error());
  std::vector<double> out;
  for (std::size_t j = 0; j < parameters(); ++j) {
    std::vector<double> up = estimate_;
    up[j] += j <= kSpan ? kSpanStep : kStep;
    const auto high = stepAt(up);
    if (!high) return std::unexpected(high.error());
    out.push_back((*high - *low) / (up[j] - estimate_[j]));
  }
  return out;
}

}  // namespace shuntwright::calibration
