#include "driver/calibration/identified_model.h"

namespace shuntwright::calibration {

using namespace units;
using description::Channel;
using description::Rack;

namespace {

/// The rows of a fit as inputs: each moves the estimate by its gain.
struct FromFit {
  LeadFit fit;
  Ratio reading;                          ///< of the zero, as read
  std::optional<UncertainInput> warming;  ///< of the leads until the test
  std::optional<Claims> claims;

  LeadFit::Situation situationAt(std::span<const double> x) const {
    const std::size_t rows = fit.rows().size();
    std::vector<double> t = fit.estimate();
    for (std::size_t r = 0; r < rows; ++r) {
      const auto& known = fit.rows()[r].distribution;
      const double off = (x[r] - known.mean) / known.standardUncertainty;
      for (std::size_t j = 0; j < t.size(); ++j) t[j] += fit.gain()(j, r) * off;
    }
    LeadFit::Situation at = fit.situationAt(t);
    if (warming) warming->shift(at.model, x[rows] - warming->input.distribution.mean);
    return at;
  }
};

}  // namespace

Result<metrology::Model> identifiedModel(const LeadFit& fit, const Rack& rack, const Channel& channel,
                                         const StrainReadings& readings, std::span<const Strain> levels) {
  const LeadFit::Situation nominal = fit.situationAt(fit.estimate());
  FromFit base{fit, readings.scale.zero * nominal.span, {}, {}};
  auto meaning = meaningOf(nominal.model, nominal.span, readings.scale.zero);
  if (!meaning) return std::unexpected(std::move(meaning.error()));
  auto claims = Claims::of(*meaning, levels);
  if (!claims) return std::unexpected(std::move(claims.error()));
  base.claims = std::move(*claims);

  metrology::Model out;
  out.inputs = fit.rows();
  for (auto& in : inputsOf(rack, channel)) {
    if (in.input.quantity != kLeadsWarming) continue;
    in.input.distribution.standardUncertainty *= readings.zero.leadsShare;
    if (!(in.input.distribution.standardUncertainty > 0)) continue;
    out.inputs.push_back(in.input);
    base.warming = std::move(in);
  }
  const std::size_t circuit = out.inputs.size();
  std::vector<std::size_t> added;  // output of each further input
  for (auto& part : readingScatter(readings, base.claims->slope_per_strain(), levels.size())) {
    out.inputs.push_back(std::move(part.input));
    added.push_back(part.output);
  }
  out.outputs = base.claims->outputs() + 1;
  const double leads_ohm = meanLead(nominal.model.atCalibration).in(ohm);
  out.function = [base = std::move(base), circuit, added, leads_ohm](std::span<const double> x,
                                                                     std::span<double> y) -> Result<void> {
    const LeadFit::Situation at = base.situationAt(x);
    const auto other = meaningOf(at.model, at.span, base.reading / at.span);
    if (!other) return std::unexpected(other.error());
    y.back() = meanLead(at.model.atCalibration).in(ohm)-leads_ohm;
    if (auto done = base.claims->evaluate(*other, y.first(y.size() - 1)); !done) return done;
    for (std::size_t k = 0; k < added.size(); ++k) y[added[k]] += x[circuit + k];
    return {};
  };
  return out;
}

}  // namespace shuntwright::calibration
