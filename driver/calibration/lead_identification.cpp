#include "driver/calibration/lead_identification.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "driver/metrology/coverage.h"
#include "driver/metrology/least_squares.h"

namespace shuntwright::calibration {

using namespace units;
using description::Terminal;

namespace {

constexpr double kUselessShare = 0.1;  // of the gauge's resistance: a tenth of the strain would be in doubt
constexpr double kKnownTo = 1e-4;      // relative, expanded: what a good meter or certificate gives
constexpr double kLeadKnownTo = 2e-3;
constexpr double kWorthwhile = 0.9;
constexpr double kTold = 0.5;
constexpr double kNoStep_V_per_V = 1e-9;

using Direction = std::vector<double>;  // d resistance / d t, ohm

Direction leadDirection(const LeadFit& fit, Terminal lead) {
  const auto& t = fit.estimate();
  const std::size_t deviation = fit.deviationAt(lead);
  Direction out(fit.parameters(), 0.0);
  out[LeadFit::kCommon] = fit.unitOf(LeadFit::kCommon) * fit.shareOf(lead) * (1 + fit.valueOf(deviation, t));
  out[deviation] =
      std::max(0.0, fit.valueOf(LeadFit::kCommon, t)) * fit.shareOf(lead) * fit.unitOf(deviation);
  return out;
}

std::vector<Terminal> carriers(const LeadFit& fit) {
  const auto kind = fit.readings().nominal.atCalibration.kind;
  std::vector<Terminal> out;
  for (const auto& [terminal, share] : fit.readings().inequality) {
    if (description::carriesCurrent(kind, terminal)) out.push_back(terminal);
  }
  return out;
}

Direction meanDirection(const LeadFit& fit) {
  const auto leads = carriers(fit);
  Direction out(fit.parameters(), 0.0);
  for (const Terminal lead : leads) {
    const Direction one = leadDirection(fit, lead);
    for (std::size_t j = 0; j < out.size(); ++j) out[j] += one[j] / static_cast<double>(leads.size());
  }
  return out;
}

Direction times(const metrology::Matrix& covariance, const Direction& g) {
  Direction out(g.size(), 0.0);
  for (std::size_t i = 0; i < g.size(); ++i) {
    for (std::size_t j = 0; j < g.size(); ++j) out[i] += covariance(i, j) * g[j];
  }
  return out;
}

double dot(const Direction& a, const Direction& b) {
  double sum = 0;
  for (std::size_t i = 0; i < a.size(); ++i) sum += a[i] * b[i];
  return sum;
}

/// Standard uncertainty that each row contributes, in ohm.
std::vector<double> contributionsOf(const LeadFit& fit, const Direction& g) {
  std::vector<double> out;
  for (std::size_t r = 0; r < fit.rows().size(); ++r) {
    double sum = 0;
    for (std::size_t j = 0; j < g.size(); ++j) sum += g[j] * fit.gain()(j, r);
    out.push_back(std::abs(sum));
  }
  return out;
}

Resistance expanded(const LeadFit& fit, const std::vector<double>& contributions) {
  std::vector<metrology::Component> parts;
  std::vector<metrology::WeightedDegrees> degrees;
  for (std::size_t r = 0; r < contributions.size(); ++r) {
    const auto& known = fit.rows()[r].distribution;
    parts.push_back({known.shape, contributions[r]});
    degrees.push_back({contributions[r], known.degreesOfFreedom});
  }
  const double student = metrology::studentFactor(metrology::effectiveDegrees(degrees)) /
                         metrology::studentFactor(metrology::kInfinity);
  return metrology::coverageHalfWidth(parts) * student * ohm;
}

/// The best of several ways to narrow the variance of a direction.
class Advisor {
 public:
  Advisor(const LeadFit& fit, const Direction& g)
      : fit_(fit), towards_(times(fit.covariance(), g)), now_(dot(g, towards_)), best_(now_) {}

  void knowInputsBetter() {
    const std::size_t data = fit_.dataRows();
    for (std::size_t j = LeadFit::kSpan + 1; j < fit_.parameters(); ++j) {
      const auto& row = fit_.rows()[data + j];
      const bool lead = row.quantity.starts_with("lead ");
      const double target =
          lead ? kLeadKnownTo / std::sqrt(3.0) : kKnownTo / 2 * std::abs(row.distribution.mean);
      const double share = target / row.distribution.standardUncertainty;  // of what it is now
      if (!(share > 0 && share < 1)) continue;
      const double more = 1 / (share * share) - 1;  // information on t
      const double variance = now_ - towards_[j] * towards_[j] * more / (1 + more * fit_.covariance()(j, j));
      offer(variance, lead
                          ? fmt::format("compare {} to {:g} %", row.quantity, 100 * kLeadKnownTo)
                          : fmt::format("know the {} to {:g} %", withoutMeans(row.quantity), 100 * kKnownTo));
    }
  }

  void switchResistors() {
    const auto& in = fit_.readings();
    const auto& circuit = in.nominal.atCalibration;
    const auto terminals =
        description::terminalsOf(circuit.kind, circuit.sensed, description::Side::instrument);
    for (std::size_t k = 0; k < in.nominal.shunts.size(); ++k) {
      for (std::size_t a = 0; a < terminals.size(); ++a) {
        for (std::size_t b = a + 1; b < terminals.size(); ++b)
          offerSwitching(k, {terminals[a], terminals[b]});
      }
    }
  }

  std::optional<LeadAdvice> best(Resistance expandedNow) const {
    if (what_.empty() || std::sqrt(best_ / now_) > kWorthwhile) return std::nullopt;
    return LeadAdvice{what_, expandedNow * std::sqrt(std::max(0.0, best_) / now_)};
  }

 private:
  static std::string withoutMeans(const std::string& quantity) {
    return quantity.substr(0, quantity.find(','));
  }

  void offerSwitching(std::size_t shunt, std::pair<Terminal, Terminal> across) {
    const auto& in = fit_.readings();
    bridge::ShuntPath path = in.nominal.shunts[shunt];
    path.across = across;
    path.side = description::Side::instrument;
    const auto slopes = fit_.slopesOfStep(shunt, path);
    if (!slopes) return;
    // Span's own slope is the step itself: a resistor that moves nothing tells nothing.
    if (std::abs((*slopes)[LeadFit::kSpan]) < kNoStep_V_per_V) return;
    const double noise = in.noise[shunt].in(volt_per_volt);
    const Direction seen = times(fit_.covariance(), *slopes);
    const double shared = dot(*slopes, towards_);
    const double variance = now_ - shared * shared / (noise * noise + dot(*slopes, seen));
    offer(variance, fmt::format("switch {} to {} and {} at the instrument as well",
                                in.resistors.size() > shunt ? in.resistors[shunt] : "a resistor",
                                description::name(across.first), description::name(across.second)));
  }

  void offer(double variance, std::string what) {
    if (variance >= best_) return;
    best_ = variance;
    what_ = std::move(what);
  }

  const LeadFit& fit_;
  Direction towards_;
  double now_, best_;
  std::string what_;
};

void findWhetherTold(const LeadFit& fit, LeadIdentification& out) {
  const double gauge = fit.readings().nominal.atCalibration.arms[0].resistance.in(ohm);
  out.identifiable = out.expandedUncertainty.in(ohm) <= kUselessShare * gauge;
  if (out.identifiable) return;
  const std::size_t steps = fit.dataRows() - (fit.readings().zero ? 1 : 0);
  out.reason = steps < 2
                   ? std::string("one shunt cannot tell the leads from the amplifier's span")
                   : fmt::format(
                         "the steps of these shunts change with the leads alike: +-{:.3g} ohm is all that "
                         "they say (condition {:.2g})",
                         out.expandedUncertainty.in(ohm), out.condition);
}

}  // namespace

LeadIdentification identified(const LeadFit& fit) {
  LeadIdentification out;
  const auto& t = fit.estimate();
  const Direction g = meanDirection(fit);
  const auto contributions = contributionsOf(fit, g);
  const auto situation = fit.situationAt(t);
  out.resistance = meanLead(situation.model.atCalibration);
  out.expandedUncertainty = expanded(fit, contributions);
  out.span = situation.span;
  const auto& c = fit.covariance();
  constexpr auto kL = LeadFit::kCommon, kS = LeadFit::kSpan;
  out.spanStandardUncertainty = fit.unitOf(kS) * std::sqrt(c(kS, kS));
  out.correlation = c(kL, kS) / std::sqrt(c(kL, kL) * c(kS, kS));
  out.condition = std::sqrt((1 + std::abs(out.correlation)) / std::max(1e-16, 1 - std::abs(out.correlation)));
  for (const auto& [terminal, share] : fit.readings().inequality) {
    const Resistance own = situation.model.atCalibration.lead(terminal);
    const Resistance u = expanded(fit, contributionsOf(fit, leadDirection(fit, terminal)));
    out.leads.push_back({terminal, own, u, u < kTold * share.in(one)*own});
  }
  for (std::size_t r = 0; r < contributions.size(); ++r) {
    out.budget.push_back({fit.rows()[r].quantity, contributions[r] * ohm});
  }
  std::ranges::stable_sort(out.budget, std::greater(), &LeadContribution::uncertainty);
  findWhetherTold(fit, out);

  const std::size_t unknown = t.size() - fit.readings().known.size() - fit.readings().inequality.size();
  metrology::Fit counted;
  counted.chiSquared = fit.chiSquared();
  counted.degreesOfFreedom = fit.dataRows() > unknown ? fit.dataRows() - unknown : 0;
  out.degreesOfFreedom = static_cast<double>(counted.degreesOfFreedom);
  if (counted.degreesOfFreedom > 0) out.probability = metrology::lackOfFit(counted).probability;

  Advisor advisor(fit, g);
  advisor.switchResistors();
  advisor.knowInputsBetter();
  out.advice = advisor.best(out.expandedUncertainty);
  return out;
}

}  // namespace shuntwright::calibration
