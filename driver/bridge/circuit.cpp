#include "driver/bridge/circuit.h"

#include <fmt/format.h>

#include <cmath>
#include <limits>

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

Circuit transducerOf(const description::TransducerSheet& sheet, units::Resistance arm, Circuit circuit) {
  circuit.excitationSeries = (sheet.inputResistance - sheet.outputResistance) / 2;
  // The inner bridge sees its share of the excitation, and four arms +x, -x, +x, -x give x.
  const double perRated =
      sheet.sensitivity.in(units::volt_per_volt) * ((arm + 2 * circuit.excitationSeries) / arm);
  const auto weights = description::armWeights(CircuitKind::transducer, 0);
  for (std::size_t i = 0; i < 4; ++i) circuit.arms[i] = {arm, weights[i] * perRated};
  return circuit;
}

}  // namespace

Result<units::Resistance> armOf(const description::TransducerSheet& sheet) {
  if (!sheet.certificateShunt) return sheet.outputResistance;
  const description::CertificateShunt& shunt = *sheet.certificateShunt;
  Circuit bare;
  bare.kind = CircuitKind::transducer;
  bare.inputResistance = std::numeric_limits<double>::infinity() * units::ohm;
  const ShuntPath path{shunt.across, description::Side::gauge, shunt.resistance};
  const auto stepAt = [&](double arm) -> Result<double> {
    const auto r = ratio(transducerOf(sheet, arm * units::ohm, bare), {}, {&path, 1});
    if (!r) return std::unexpected(r.error());
    return std::abs(r->in(units::volt_per_volt));
  };
  // The step grows with the arm: halve the bracket until nothing is left between its ends.
  const double nominal = sheet.outputResistance.in(units::ohm), wanted = shunt.step.in(units::volt_per_volt);
  double low = nominal / 2, high = 2 * nominal;
  const auto least = stepAt(low), most = stepAt(high);
  if (!least) return std::unexpected(least.error());
  if (!most) return std::unexpected(most.error());
  if (!(*least <= wanted && wanted <= *most)) {
    return fail(
        ErrorCode::bad_use,
        fmt::format("the certificate's shunt of {:.6g} ohm cannot give {:.6g} mV/V on a transducer of {:.6g} "
                    "ohm; that would be about {:.6g} mV/V",
                    shunt.resistance.in(units::ohm), wanted * 1e3, nominal,
                    250 * nominal / shunt.resistance.in(units::ohm)),
        {}, "check the resistor, the step and the output resistance in the certificate");
  }
  for (double middle = low + (high - low) / 2; low < middle && middle < high;
       middle = low + (high - low) / 2) {
    const auto step = stepAt(middle);
    if (!step) return std::unexpected(step.error());
    (*step < wanted ? low : high) = middle;
  }
  return high * units::ohm;
}

Circuit circuitOf(const description::Rack& rack, const description::Channel& channel) {
  const description::Device* device = rack.device(channel.device);
  const description::Inputs* inputs =
      device && device->profile && device->profile->inputs ? &*device->profile->inputs : nullptr;
  Circuit circuit;
  circuit.kind = channel.circuit;
  circuit.sensed = channel.sensed;
  if (inputs) circuit.inputResistance = inputs->inputResistance;
  for (const auto& [terminal, lead] : channel.leads) circuit.lead(terminal) = lead.resistance;

  if (channel.circuit == CircuitKind::transducer) {
    const description::TransducerSheet sheet = channel.transducer.value_or(description::TransducerSheet{});
    return transducerOf(sheet, armOf(sheet).value_or(sheet.outputResistance), circuit);
  }

  const auto weights = description::armWeights(channel.circuit, channel.poisson);
  const units::Resistance completion = completionOf(channel, inputs, rack.gaugeOf(channel).resistance.value);
  const Topology& topology = *topologyOf(channel.circuit, false);
  const units::Resistance inner = inputs ? inputs->halfBridge.value : units::Resistance{};
  for (std::size_t i = 0; i < 4; ++i) {
    const bool isGauge = topology.isGauge[i];
    const bool isCompletion =
        (channel.circuit == CircuitKind::quarter_2_wire || channel.circuit == CircuitKind::quarter_3_wire)
            ? i == 1
            : channel.circuit == CircuitKind::half_opposite;
    if (isGauge) {
      const description::GaugeOfArm gauge = rack.gaugeOf(channel, i);
      circuit.arms[i] = {gauge.resistance.value, weights[i] * gauge.factor.value()};
    } else {
      circuit.arms[i] = {isCompletion ? completion : inner, 0};
    }
  }
  return circuit;
}

ShuntPath pathOf(const description::Rack& rack, const description::Shunt& shunt) {
  const description::Device* device = rack.device(shunt.relay.device);
  const bool switched = device && device->profile && device->profile->relays;
  ShuntPath path{.across = shunt.across, .side = shunt.side, .resistance = rack.resistorOf(shunt).value};
  if (!switched) return path;
  const auto& relays = *device->profile->relays;
  path.resistance += relays.contactResistance;
  // Conductance added by closing: 1 / R_C - 1 / (R_C + leak), that of R_C + R_C^2 / leak.
  if (relays.leakage) path.resistance += 0.5 * leakEquivalent(path.resistance, *relays.leakage);
  return path;
}

units::Resistance leakEquivalent(units::Resistance shunt, units::Resistance leakage) {
  return shunt * (shunt / leakage);
}

}  // namespace shuntwright::bridge
