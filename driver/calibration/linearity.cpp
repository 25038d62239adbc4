#include "driver/calibration/linearity.h"

#include <algorithm>
#include <cmath>

#include "driver/calibration/measurement_model.h"
#include "driver/metrology/first_order.h"

namespace shuntwright::calibration {

using namespace units;

namespace {

std::vector<double> valuesOf(const std::vector<Ratio>& ratios) {
  std::vector<double> values;
  for (const auto r : ratios) values.push_back(r.in(volt_per_volt));
  return values;
}

}  // namespace

Result<Linearity> linearityOf(const description::Rack& rack, const description::Channel& channel, Ratio zero,
                              const std::vector<Ratio>& measured, const std::vector<Ratio>& noise) {
  const std::size_t count = channel.shunts.size();
  if (count == 0 || measured.size() != count || noise.size() != count) {
    return fail(ErrorCode::bad_use, "linearity needs a step and its noise for each shunt",
                "channel " + channel.name);
  }
  if (!std::ranges::all_of(noise, [](Ratio u) { return u.in(volt_per_volt) > 0; })) {
    return fail(ErrorCode::bad_use, "the noise of a step must be above 0", "channel " + channel.name,
                "count at least the resolution of the readings");
  }
  MeasurementInputs inputs(modelOf(rack, channel));
  for (auto& in : inputsOf(rack, channel)) inputs.add(std::move(in));
  const auto model = std::move(inputs).model(
      count, [zero](const ChannelModel& shifted, std::span<double> y) -> Result<void> {
        auto prediction = predictScale(shifted, zero);
        if (!prediction) return std::unexpected(std::move(prediction.error()));
        std::ranges::copy(valuesOf(prediction->steps), y.begin());
        return {};
      });
  auto steps = metrology::firstOrder(model);
  if (!steps) return std::unexpected(std::move(steps.error()));

  std::vector<double> predicted;
  for (const auto& step : steps->outputs) predicted.push_back(step.value);
  const std::vector<double> y = valuesOf(measured), u = valuesOf(noise);
  const metrology::Matrix design = metrology::throughOrigin(predicted);
  // The covariance of span x predicted needs the span: that of a first fit is near enough.
  metrology::ObservationErrors errors;
  auto fit = metrology::fitLinear(design, y);
  if (!fit) return std::unexpected(std::move(fit.error()));
  errors.covariance = steps->covariance;
  for (auto& v : errors.covariance->values) v *= fit->parameters[0] * fit->parameters[0];
  for (std::size_t k = 0; k < count; ++k) (*errors.covariance)(k, k) += u[k] * u[k];
  fit = metrology::fitLinear(design, y, errors);
  if (!fit) return std::unexpected(std::move(fit.error()));

  Linearity out;
  out.span = fit->parameters[0];
  out.standardUncertainty = fit->standardUncertainty(0);
  out.lackOfFit = metrology::lackOfFit(*fit);
  double worst = 0, largest = 0;
  for (std::size_t k = 0; k < count; ++k) {
    out.residuals.push_back(fit->residuals[k] * volt_per_volt);
    worst = std::max(worst, std::abs(fit->residuals[k]));
    largest = std::max(largest, std::abs(y[k]));
  }
  out.worst_percent = largest > 0 ? 100 * worst / largest : 0;
  return out;
}

}  // namespace shuntwright::calibration
