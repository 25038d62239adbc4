#include "driver/calibration/measurement_model.h"

namespace shuntwright::calibration {

void MeasurementInputs::add(UncertainInput in) {
  if (in.input.distribution.standardUncertainty > 0) circuit_.push_back(std::move(in));
}

void MeasurementInputs::addToOutput(std::string quantity, std::string unit,
                                    const metrology::Distribution& distribution, std::size_t output) {
  added_.push_back({{std::move(quantity), std::move(unit), distribution}, output});
}

metrology::Model MeasurementInputs::model(std::size_t outputs, Outputs function) && {
  metrology::Model model;
  model.outputs = outputs;
  for (const auto& in : circuit_) model.inputs.push_back(in.input);
  for (const auto& in : added_) model.inputs.push_back(in.input);
  model.function = [nominal = std::move(nominal_), circuit = std::move(circuit_), added = std::move(added_),
                    function = std::move(function)](std::span<const double> x,
                                                    std::span<double> y) -> Result<void> {
    ChannelModel shifted = nominal;
    std::size_t i = 0;
    for (const auto& in : circuit) in.shift(shifted, x[i++] - in.input.distribution.mean);
    if (auto done = function(shifted, y); !done) return done;
    for (const auto& in : added) y[in.output] += x[i++];
    return {};
  };
  return model;
}

}  // namespace shuntwright::calibration
