#include "driver/bridge/circuit.h"

#include <cmath>

#include "driver/bridge/topology.h"

namespace shuntwright::bridge {

using description::CircuitKind;

namespace {

/// The completion resistor the channel uses: the one it names, else the profile's nearest to the gauge.
units::Resistance completionOf(const description::Channel& channel, const description::Inputs* inputs,
                               units::Resistance gauge) {
  if (channel.completion) return *channel.completion;
  if (!inputs || inputs->completions.empty()) return gauge;
  units::Resistance best = inputs->completions.front().value;
  for (const auto& offered : inputs->completions) {
    const auto off = [&](units::Resistance r) { return std::abs((r - gauge).in(units::ohm)); };
    if (off(offered.value) < off(best)) best = offered.value;
  }
  return best;
}

}  // namespace

Circuit circuitOf(const description::Rack& rack, const description::Channel& channel) {
  const description::Device* device = rack.device(channel.device);
  const description::Inputs* inputs =
      device && device->profile && device->profile->inputs ? &*device->profile->inputs : nullptr;
  Circuit circuit;
  circuit.kind = channel.circuit;
  circuit.sensed = channel.sensed;
  if (inputs) circuit.inputResistance = inputs->inputResistance;
  for (const auto& [terminal, lead] : channel.leads) circuit.lead(terminal) = lead.resistance;

  const auto weights = description::armWeights(channel.circuit, channel.poisson);
  if (channel.circuit == CircuitKind::transducer) {
    const description::TransducerSheet sheet = channel.transducer.value_or(description::TransducerSheet{});
    circuit.excitationSeries = (sheet.inputResistance - sheet.outputResistance) / 2;
    // The inner bridge sees R_out / R_in of the excitation, and four arms +x, -x, +x, -x give x.
    const double perRated =
        sheet.sensitivity.in(units::volt_per_volt) * (sheet.inputResistance / sheet.outputResistance);
    for (std::size_t i = 0; i < 4; ++i) circuit.arms[i] = {sheet.outputResistance, weights[i] * perRated};
    return circuit;
  }

  const description::GaugeSheet& sheet = rack.gaugeOf(channel);
  const units::Resistance gauge =
      channel.measuredResistance ? channel.measuredResistance->value : sheet.resistance.value;
  const units::Resistance completion = completionOf(channel, inputs, sheet.resistance.value);
  const Topology& topology = *topologyOf(channel.circuit, false);
  const units::Resistance inner = inputs ? inputs->halfBridge.value : units::Resistance{};
  for (std::size_t i = 0; i < 4; ++i) {
    const bool isGauge = topology.isGauge[i];
    const bool isCompletion =
        (channel.circuit == CircuitKind::quarter_2_wire || channel.circuit == CircuitKind::quarter_3_wire)
            ? i == 1
            : channel.circuit == CircuitKind::half_opposite;
    circuit.arms[i] = {isGauge        ? gauge
                       : isCompletion ? completion
                                      : inner,
                       weights[i] * sheet.factor.value()};
  }
  return circuit;
}

ShuntPath pathOf(const description::Rack& rack, const description::Shunt& shunt) {
  const description::Device* device = rack.device(shunt.relay.device);
  const bool switched = device && device->profile && device->profile->relays;
  return {.across = shunt.across,
          .side = shunt.side,
          .resistance = rack.resistorOf(shunt).value +
                        (switched ? device->profile->relays->contactResistance : units::Resistance{})};
}

}  // namespace shuntwright::bridge
