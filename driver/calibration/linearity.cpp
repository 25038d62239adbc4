#include "driver/calibration/linearity.h"

#include <algorithm>
#include <cmath>
#include <limits>

#include "driver/calibration/measurement_model.h"
#include "driver/metrology/coverage.h"
#include "driver/metrology/first_order.h"

namespace shuntwright::calibration {

using namespace units;

namespace {

double valueOf(Ratio r) {
  return r.in(volt_per_volt);
}

/// The steps that were measured: y = span x, with the covariance of y - span x.
struct Line {
  std::vector<std::size_t> shunts;
  std::vector<double> x, y;
  metrology::Matrix covariance;

  Line(const PredictedSteps& predicted, const std::vector<Ratio>& measured, const std::vector<Ratio>& noise) {
    for (std::size_t k = 0; k < measured.size(); ++k) {
      if (!std::isfinite(valueOf(measured[k]))) continue;
      shunts.push_back(k);
      x.push_back(valueOf(predicted.steps[k]));
      y.push_back(valueOf(measured[k]));
    }
    // The prediction counts as often as the span says; the ratio of the steps' sizes is near enough to it.
    double top = 0, bottom = 0;
    for (std::size_t i = 0; i < x.size(); ++i) {
      top += x[i] * y[i];
      bottom += x[i] * x[i];
    }
    const double span = bottom > 0 ? top / bottom : 1;
    covariance = metrology::Matrix(x.size(), x.size());
    for (std::size_t i = 0; i < x.size(); ++i) {
      for (std::size_t j = 0; j < x.size(); ++j) {
        covariance(i, j) = span * span * predicted.covariance(shunts[i], shunts[j]);
      }
      covariance(i, i) += valueOf(noise[shunts[i]]) * valueOf(noise[shunts[i]]);
    }
  }
};

/// Variance of sum of a_i y_i.
double varianceOf(const std::vector<double>& a, const metrology::Matrix& covariance) {
  double sum = 0;
  for (std::size_t i = 0; i < a.size(); ++i) {
    for (std::size_t j = 0; j < a.size(); ++j) sum += a[i] * covariance(i, j) * a[j];
  }
  return std::max(0.0, sum);
}

}  // namespace

Result<PredictedSteps> predictedSteps(const description::Rack& rack, const description::Channel& channel,
                                      Ratio zero) {
  MeasurementInputs inputs(modelWithLeads(rack, channel));
  for (auto& in : inputsOf(rack, channel)) inputs.add(std::move(in));
  const auto model = std::move(inputs).model(
      channel.shunts.size(), [zero](const ChannelModel& shifted, std::span<double> y) -> Result<void> {
        auto prediction = predictScale(shifted, zero);
        if (!prediction) return std::unexpected(std::move(prediction.error()));
        std::ranges::transform(prediction->steps, y.begin(), valueOf);
        return {};
      });
  auto propagated = metrology::firstOrder(model);
  if (!propagated) return std::unexpected(std::move(propagated.error()));
  PredictedSteps out;
  for (const auto& step : propagated->outputs) out.steps.push_back(step.value * volt_per_volt);
  out.covariance = std::move(propagated->covariance);
  return out;
}

Ratio resolutionOfStep(Ratio digit) {
  constexpr double kLeast_V_per_V = 1e-12;
  return std::max(kLeast_V_per_V, valueOf(digit) / std::sqrt(6.0)) * volt_per_volt;
}

std::vector<double> stepWeights(const PredictedSteps& predicted, const std::vector<Ratio>& noise) {
  std::vector<double> weights;
  for (std::size_t k = 0; k < predicted.steps.size(); ++k) {
    const double variance = predicted.covariance(k, k) + valueOf(noise[k]) * valueOf(noise[k]);
    weights.push_back(variance > 0 ? 1 / variance : 0);
  }
  return weights;
}

Result<Linearity> linearityOf(const PredictedSteps& predicted, const std::vector<Ratio>& measured,
                              const std::vector<Ratio>& noise) {
  const std::size_t count = predicted.steps.size();
  if (measured.size() != count || noise.size() != count) {
    return fail(ErrorCode::bad_use, "linearity needs a step and its noise for each shunt");
  }
  if (!std::ranges::all_of(noise, [](Ratio u) { return valueOf(u) > 0; })) {
    return fail(ErrorCode::bad_use, "the noise of a step must be above 0", {},
                "count at least the resolution of the readings");
  }
  const Line line(predicted, measured, noise);
  if (line.x.empty()) return fail(ErrorCode::bad_use, "no step was measured");
  const auto weights = stepWeights(predicted, noise);

  Linearity out;
  out.span = spanOf(measured, predicted.steps, weights);
  out.residuals.assign(count, std::numeric_limits<double>::quiet_NaN() * volt_per_volt);
  std::vector<double> share;  // of each y in the span
  double bottom = 0, largest = 0;
  for (std::size_t i = 0; i < line.x.size(); ++i) {
    const double weight = weights[line.shunts[i]];
    share.push_back(weight * line.x[i]);
    bottom += weight * line.x[i] * line.x[i];
    largest = std::max(largest, std::abs(line.y[i]));
  }
  for (double& a : share) a /= bottom;
  out.standardUncertainty = std::sqrt(varianceOf(share, line.covariance));
  for (std::size_t i = 0; i < line.x.size(); ++i) {
    const double residual = line.y[i] - out.span * line.x[i];
    out.residuals[line.shunts[i]] = residual * volt_per_volt;
    if (largest <= 0 || 100 * std::abs(residual) / largest < out.worst_percent) continue;
    std::vector<double> a;  // residual = sum of a_j y_j
    for (std::size_t j = 0; j < line.x.size(); ++j) a.push_back((i == j ? 1 : 0) - line.x[i] * share[j]);
    out.worst_percent = 100 * std::abs(residual) / largest;
    out.worstExpanded_percent = 100 * metrology::studentFactor(metrology::kInfinity) *
                                std::sqrt(varianceOf(a, line.covariance)) / largest;
  }
  metrology::ObservationErrors errors;
  errors.covariance = line.covariance;
  const auto fit = metrology::fitLinear(metrology::throughOrigin(line.x), line.y, errors);
  if (!fit) return std::unexpected(fit.error());
  out.lackOfFit = metrology::lackOfFit(*fit);
  return out;
}

}  // namespace shuntwright::calibration
