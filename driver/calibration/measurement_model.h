#pragma once

#include <functional>
#include <span>
#include <string>
#include <vector>

#include "driver/calibration/channel_model.h"
#include "driver/metrology/model.h"

namespace shuntwright::calibration {

/// Collects the inputs of a measurement on one channel: first those that change the circuit, in the order in
/// which their shifts are applied, then those that add straight to an output.
class MeasurementInputs {
 public:
  explicit MeasurementInputs(ChannelModel nominal) : nominal_(std::move(nominal)) {}

  /// Without uncertainty it is left out.
  void add(UncertainInput in);
  /// In the output's unit.
  void addToOutput(std::string quantity, std::string unit, const metrology::Distribution& distribution,
                   std::size_t output = 0);

  /// What a changed circuit gives, without what adds straight to the outputs.
  using Outputs = std::function<Result<void>(const ChannelModel& shifted, std::span<double> y)>;
  metrology::Model model(std::size_t outputs, Outputs function) &&;

 private:
  struct Added {
    metrology::Input input;
    std::size_t output;
  };
  ChannelModel nominal_;
  std::vector<UncertainInput> circuit_;
  std::vector<Added> added_;
};

}  // namespace shuntwright::calibration
