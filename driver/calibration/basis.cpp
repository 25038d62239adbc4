#include "driver/calibration/basis.h"

#include <fmt/format.h>

#include "driver/core/clock.h"

namespace shuntwright::calibration {

using namespace units;
using description::Channel;
using description::Rack;

namespace {

const char* const kRemedy = "calibrate again";

// Nine digits: the same value written another way ("0.12 kohm") is the same text.
std::string text(Resistance r) {
  return fmt::format("{:.9g} ohm", r.in(ohm));
}
std::string text(Ratio r) {
  return fmt::format("{:.9g} mV/V", r.in(millivolt_per_volt));
}
std::string text(Voltage v) {
  return fmt::format("{:.9g} V", v.in(volt));
}
std::string within(Fraction f) {
  return fmt::format(" within {:.9g} %", f.in(percent));
}

std::string text(const description::Lead& lead) {
  return text(lead.resistance) + within(lead.tolerance) +
         fmt::format(" at {:.9g} degC within {:.9g} K", lead.temperature.celsius(),
                     lead.temperatureTolerance.in(kelvin));
}

std::string text(const std::pair<description::Terminal, description::Terminal>& across) {
  return std::string(name(across.first)) + " and " + std::string(name(across.second));
}

std::string shuntText(const Rack& rack, const description::Shunt& shunt) {
  const description::Resistor& r = rack.resistorOf(shunt);
  std::string out = text(r.value) + within(r.tolerance);
  if (r.expandedUncertainty.in(percent) > 0) {
    out += fmt::format(", certified to {:.9g} % (k = {:.9g})", r.expandedUncertainty.in(percent),
                       r.coverageFactor);
  }
  out += fmt::format(", {:.9g} ppm/K over {:.9g} K", r.temperatureCoefficient.in(ppm_per_kelvin),
                     r.temperatureSpan.in(kelvin));
  out += " between " + text(shunt.across) + " at the " + std::string(name(shunt.side)) +
         fmt::format(" by {}/{}", shunt.relay.device, shunt.relay.relay);
  if (const auto* board = rack.device(shunt.relay.device); board && board->profile->relays) {
    const description::Relays& relays = *board->profile->relays;
    out += " with contacts of " + text(relays.contactResistance) + " within " + text(relays.contactTolerance);
    if (relays.leakage) out += ", open " + text(*relays.leakage);
  }
  return out;
}

void addInputs(Basis& basis, const description::Inputs& inputs) {
  basis["amplifier's range"] = text(inputs.fullScale);
  basis["amplifier's resolution"] = text(inputs.resolution);
  basis["amplifier's zero stability"] = text(inputs.zeroStability);
  basis["amplifier's own offset"] = text(inputs.zeroOffset);
  basis["amplifier's input resistance"] = text(inputs.inputResistance);
  basis["amplifier's filter"] = fmt::format("{:.9g} s", seconds(inputs.filterTimeConstant));
  basis["amplifier's half bridge"] = text(inputs.halfBridge.value) + within(inputs.halfBridge.tolerance);
  std::string& completions = basis["amplifier's completion resistors"];
  for (const auto& offered : inputs.completions) {
    completions += (completions.empty() ? "" : ", ") + text(offered.value) + within(offered.tolerance);
  }
}

void addTransducer(Basis& basis, const description::TransducerSheet& sheet) {
  basis["input resistance"] = text(sheet.inputResistance) + within(sheet.inputTolerance);
  basis["output resistance"] = text(sheet.outputResistance) + within(sheet.outputTolerance);
  basis["sensitivity"] = text(sheet.sensitivity) + within(sheet.sensitivityTolerance);
  basis["rated value"] = fmt::format("{:.9g} {}", sheet.ratedValue, sheet.unit);
  if (!sheet.certificateShunt) return;
  const description::CertificateShunt& shunt = *sheet.certificateShunt;
  basis["certificate's shunt"] = text(shunt.resistance) + " between " + text(shunt.across) + " gives " +
                                 text(shunt.step) + within(shunt.tolerance);
}

void addGauges(Basis& basis, const Rack& rack, const Channel& channel) {
  basis["Poisson's ratio"] = fmt::format("{:.9g}", channel.poisson);
  const auto weights = description::armWeights(channel.circuit, channel.poisson);
  for (std::size_t arm = 0; arm < weights.size(); ++arm) {
    if (weights[arm] == 0) continue;
    const description::GaugeOfArm gauge = rack.gaugeOf(channel, arm);
    const std::string of = fmt::format(" of arm {}", arm + 1);
    basis["gauge factor" + of] = fmt::format("{:.9g}", gauge.factor.value()) + within(gauge.factorTolerance);
    basis["gauge resistance" + of] = text(gauge.resistance.value) + within(gauge.resistance.tolerance) +
                                     (gauge.measured ? ", measured" : "");
  }
}

const char* words(description::LeadLoss where) {
  switch (where) {
    case description::LeadLoss::in_prediction: return "in the prediction";
    case description::LeadLoss::in_span: return "in the span";
    case description::LeadLoss::identified: return "identified";
  }
  return "";
}

const char* words(description::Unbalance cause) {
  switch (cause) {
    case description::Unbalance::unknown:
      return "unknown";
    case description::Unbalance::standing_strain:
      return "standing strain";
    case description::Unbalance::gauge_off_nominal:
      return "gauge off nominal";
    case description::Unbalance::completion:
      return "completion";
  }
  return "";
}

/// What a person reads of the first fact that is not the same; nothing when all are.
std::string difference(const Basis& then, const Basis& now) {
  for (const auto& [what, value] : now) {
    const auto found = then.find(what);
    if (found == then.end()) return what + " is " + value + " and was not there";
    if (found->second != value) return what + " is " + value + " and was " + found->second;
  }
  for (const auto& [what, value] : then) {
    if (!now.contains(what)) return what + " was " + value + " and is not there any more";
  }
  return {};
}

}  // namespace

Basis basisOf(const Rack& rack, const Channel& channel) {
  Basis basis;
  const description::Device* device = rack.device(channel.device);
  basis["device"] = channel.device + (device ? " of profile " + device->profile->name : "");
  basis["input"] = std::to_string(channel.input);
  basis["circuit"] = std::string(name(channel.circuit)) + (channel.sensed ? ", sensed" : "");
  basis["excitation"] = text(channel.excitation);
  basis["lead loss"] = words(channel.leadLoss);
  basis["cause of unbalance"] = words(channel.unbalance);
  if (device && device->profile->inputs) addInputs(basis, *device->profile->inputs);
  for (const auto& [terminal, lead] : channel.leads)
    basis["lead " + std::string(name(terminal))] = text(lead);
  if (channel.completion) basis["completion resistor"] = text(*channel.completion);
  if (channel.transducer) addTransducer(basis, *channel.transducer);
  if (!channel.gauge.empty()) addGauges(basis, rack, channel);
  for (const auto& shunt : channel.shunts) basis["shunt \"" + shunt.name + '"'] = shuntText(rack, shunt);
  return basis;
}

Result<void> stillHolds(const Record& record, const Rack& rack, const Channel& channel) {
  const std::string calibration = "calibration record " + record.id;
  if (record.rackName != rack.name) {
    return fail(ErrorCode::refused,
                calibration + " is of rack " + record.rackName + " and not of " + rack.name, rack.file,
                kRemedy);
  }
  const ChannelResult* result = record.channel(channel.name);
  if (!result) {
    return fail(ErrorCode::not_found, calibration + " has no channel " + channel.name, channel.place.text(),
                "calibrate the whole rack, or take the channel out of it");
  }
  const std::string differs = difference(result->basis, basisOf(rack, channel));
  if (differs.empty()) return {};
  return fail(ErrorCode::refused,
              "channel " + channel.name + " is not as " + calibration + " found it: " + differs,
              channel.place.text(), kRemedy);
}

Result<void> stillHolds(const Record& record, const Rack& rack) {
  Result<void> first;
  int more = 0;
  for (const auto& channel : rack.channels) {
    auto holds = stillHolds(record, rack, channel);
    if (holds) continue;
    if (!first) {
      ++more;
    } else {
      first = std::move(holds);
    }
  }
  if (more > 0 && record.rackName == rack.name) {
    first.error().message +=
        fmt::format("; {} more channel{} differ{}", more, more == 1 ? "" : "s", more == 1 ? "s" : "");
  }
  return first;
}

Result<void> sameDevices(const Record& record, const rack::LiveRack& live) {
  for (const auto& then : record.devices) {
    const auto* described = live.described().device(then.name);
    if (!described) continue;  // a channel on it is told by stillHolds()
    const device::Identity& now = live.identity(then.name);
    if (now.serialNumber == then.serialNumber && now.model == then.model) continue;
    return fail(ErrorCode::refused,
                fmt::format("device {} is {} {} and was {} {} in calibration record {}", then.name, now.model,
                            now.serialNumber, then.model, then.serialNumber, record.id),
                described->place.text(), kRemedy);
  }
  return {};
}

}  // namespace shuntwright::calibration
