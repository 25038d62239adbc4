#include "driver/calibration/channel_model.h"

#include <algorithm>
#include <array>
#include <cmath>

#include "driver/units/copper.h"

namespace shuntwright::calibration {

using namespace units;
using description::Channel;
using description::Rack;
using description::Terminal;
using description::Unbalance;

ChannelModel modelWithLeads(const Rack& rack, const Channel& channel) {
  ChannelModel model;
  model.atCalibration = bridge::circuitOf(rack, channel);
  model.inTest = model.atCalibration;
  model.cause = channel.unbalance;
  for (const auto& shunt : channel.shunts) model.shunts.push_back(bridge::pathOf(rack, shunt));
  return model;
}

ChannelModel modelOf(const Rack& rack, const Channel& channel) {
  ChannelModel model = modelWithLeads(rack, channel);
  if (channel.leadLoss == description::LeadLoss::in_span) {
    model.atCalibration.leads.fill(0.0 * ohm);
    model.inTest.leads.fill(0.0 * ohm);
  }
  return model;
}

Resistance meanLead(const bridge::Circuit& circuit) {
  double sum_ohm = 0;
  int count = 0;
  for (const Terminal lead : description::leadsOf(circuit.kind, circuit.sensed)) {
    if (!description::carriesCurrent(circuit.kind, lead)) continue;
    sum_ohm += circuit.lead(lead).in(ohm);
    ++count;
  }
  return sum_ohm / std::max(1, count) * ohm;
}

namespace {

/// The x at which the bridge, changed by it, shows `zero`: secant steps, since the ratio is a smooth and monotonic
/// function of one arm or of the strain. Gives up, with `trouble`, beyond `reach` of the start.
template <class RatioAt>
Result<double> solveForZero(RatioAt ratioAt, Ratio zero, double start, double step, double reach, const Error& trouble) {
  const auto miss = [&](double x) -> Result<double> {
    auto r = ratioAt(x);
    if (!r) return std::unexpected(std::move(r.error()));
    return (*r - zero).in(volt_per_volt);
  };
  double a = start, b = start + step;
  auto fa = miss(a), fb = miss(b);
  for (int i = 0; i < 40; ++i) {
    if (!fa) return std::unexpected(fa.error());
    if (!fb) return std::unexpected(fb.error());
    if (std::abs(*fb) < 1e-15 || *fa == *fb) break;
    const double c = b - *fb * (b - a) / (*fb - *fa);
    a = b;
    fa = fb;
    b = c;
    if (!(std::abs(b - start) < reach)) return std::unexpected(trouble);
    fb = miss(b);
  }
  return b;
}

/// The factor on one arm's resistance that makes the unstrained bridge show `zero`.
Result<double> armFactor(bridge::Circuit circuit, std::size_t arm, Ratio zero) {
  const Resistance nominal = circuit.arms[arm].resistance;
  const auto ratioAt = [&](double factor) {
    circuit.arms[arm].resistance = nominal * factor;
    return bridge::ratio(circuit, {});
  };
  return solveForZero(ratioAt, zero, 1, 0.001, 0.3,
                      Error(ErrorCode::bad_use, "the zero reading is too far off for a resistor off nominal", {},
                            "check the wiring; an open or shorted arm reads like this"));
}

Result<Strain> standingStrain(const bridge::Circuit& circuit, Ratio zero) {
  const auto ratioAt = [&](double strainValue) { return bridge::ratio(circuit, strainValue * strain); };
  auto found = solveForZero(ratioAt, zero, 0, 1e-4, 2,
                            Error(ErrorCode::bad_use, "no standing strain explains the zero reading", {},
                                  "check the wiring"));
  if (!found) return std::unexpected(std::move(found.error()));
  return *found * strain;
}

}  // namespace

Result<WorkingPoint> explain(const bridge::Circuit& circuit, Ratio zero, Unbalance cause) {
  WorkingPoint point{circuit, {}};
  if (cause == Unbalance::standing_strain) {
    auto standing = standingStrain(circuit, zero);
    if (!standing) return std::unexpected(std::move(standing.error()));
    point.standing = *standing;
    return point;
  }
  const std::size_t arm = cause == Unbalance::completion ? 1 : 0;
  auto factor = armFactor(circuit, arm, zero);
  if (!factor) return std::unexpected(std::move(factor.error()));
  point.circuit.arms[arm].resistance = circuit.arms[arm].resistance * *factor;
  return point;
}

namespace {

Result<double> slopeAt(const WorkingPoint& point) {
  const Strain half = 100.0 * microstrain;
  auto up = bridge::ratio(point.circuit, point.standing + half);
  if (!up) return std::unexpected(std::move(up.error()));
  auto down = bridge::ratio(point.circuit, point.standing - half);
  if (!down) return std::unexpected(std::move(down.error()));
  return (*up - *down).in(volt_per_volt) / (2 * half.in(strain));
}

}  // namespace

WorkingPoint moved(const WorkingPoint& point, const bridge::Circuit& from, const bridge::Circuit& to) {
  WorkingPoint out{to, point.standing};
  for (std::size_t k = 0; k < 4; ++k) {
    const double factor = point.circuit.arms[k].resistance / from.arms[k].resistance;
    out.circuit.arms[k].resistance = to.arms[k].resistance * factor;
  }
  return out;
}

Result<ScalePrediction> predictScale(const ChannelModel& model, Ratio zero) {
  auto point = explain(model.atCalibration, zero, model.cause);
  if (!point) return std::unexpected(std::move(point.error()));
  ScalePrediction prediction;
  auto before = bridge::ratio(point->circuit, point->standing);
  if (!before) return std::unexpected(std::move(before.error()));
  for (const auto& path : model.shunts) {
    auto after = bridge::ratio(point->circuit, point->standing, std::span(&path, 1));
    if (!after) return std::unexpected(std::move(after.error()));
    prediction.steps.push_back(*after - *before);
  }
  auto slope = slopeAt(moved(*point, model.atCalibration, model.inTest));
  if (!slope) return std::unexpected(std::move(slope.error()));
  prediction.slope_per_strain = *slope;
  return prediction;
}

double spanOf(const std::vector<Ratio>& measured, const std::vector<Ratio>& predicted,
              const std::vector<double>& weights) {
  double top = 0, bottom = 0;
  for (std::size_t k = 0; k < measured.size(); ++k) {
    const double y = measured[k].in(volt_per_volt), x = predicted[k].in(volt_per_volt);
    if (!std::isfinite(y)) continue;
    const double weight = weights.empty() ? 1 : weights[k];
    top += weight * x * y;
    bottom += weight * x * x;
  }
  return bottom > 0 ? top / bottom : 1;
}

// ---------------------------------------------------------------- what is not known exactly

namespace {

using metrology::normal;
using metrology::rectangular;

void shiftArm(ChannelModel& model, std::size_t arm, double delta_ohm) {
  model.atCalibration.arms[arm].resistance += delta_ohm * ohm;
  model.inTest.arms[arm].resistance += delta_ohm * ohm;
}

/// Changes a transducer's terminal resistances. Its sensitivity stays: the certificate holds for the terminals.
void shiftTransducer(ChannelModel& model, double input_ohm, double output_ohm) {
  for (bridge::Circuit* circuit : {&model.atCalibration, &model.inTest}) {
    const double output = circuit->arms[0].resistance.in(ohm);
    const double input = output + 2 * circuit->excitationSeries.in(ohm);
    circuit->excitationSeries += 0.5 * (input_ohm - output_ohm) * ohm;
    const double gain = ((input + input_ohm) / (output + output_ohm)) / (input / output);
    for (auto& arm : circuit->arms) {
      arm.resistance += output_ohm * ohm;
      arm.relativePerStrain *= gain;
    }
  }
}

void addTransducer(const description::TransducerSheet& sheet, std::vector<UncertainInput>& out) {
  const double input = sheet.inputResistance.in(ohm), output = sheet.outputResistance.in(ohm);
  out.push_back({{"input resistance of the transducer", "ohm", rectangular(input, input * sheet.inputTolerance.in(one))},
                 [](ChannelModel& m, double delta) { shiftTransducer(m, delta, 0); }});
  if (sheet.certificateShunt) {
    const double step = sheet.certificateShunt->step.in(millivolt_per_volt);
    const double share = sheet.certificateShunt->tolerance.in(one);
    // The arm that explains a step other than the certificate's.
    const auto shift = [sheet, step](ChannelModel& m, double delta) {
      const auto arm = bridge::armOf(sheet);
      description::TransducerSheet other = sheet;
      other.certificateShunt->step = (step + delta) * millivolt_per_volt;
      const auto moved = bridge::armOf(other);
      if (arm && moved) shiftTransducer(m, 0, (*moved - *arm).in(ohm));
    };
    out.push_back({{"step of the certificate's shunt", "mV/V", rectangular(step, step * share)}, shift});
    return;
  }
  out.push_back(
      {{"output resistance of the transducer", "ohm", rectangular(output, output * sheet.outputTolerance.in(one))},
       [](ChannelModel& m, double delta) { shiftTransducer(m, 0, delta); }});
}

void addArms(const Rack& rack, const Channel& channel, const ChannelModel& model, std::vector<UncertainInput>& out) {
  const auto& inputs = *rack.device(channel.device)->profile->inputs;
  for (std::size_t arm = 0; arm < 4; ++arm) {
    const auto& part = model.atCalibration.arms[arm];
    const double value = part.resistance.in(ohm);
    const auto shift = [arm](ChannelModel& m, double delta) { shiftArm(m, arm, delta); };
    const std::string number = " of arm " + std::to_string(arm + 1);
    if (part.relativePerStrain != 0) {
      const auto gauge = rack.gaugeOf(channel, arm);
      const double share = gauge.resistance.tolerance.in(one);
      out.push_back(gauge.measured
                        ? UncertainInput{{"gauge resistance" + number + ", measured", "ohm", normal(value, value * share / 2)},
                                         shift}  // expanded, k = 2
                        : UncertainInput{{"gauge resistance" + number, "ohm", rectangular(value, value * share)}, shift});
    } else if (arm == 1 || (arm == 3 && channel.circuit == description::CircuitKind::half_opposite)) {
      double tolerance = 0;
      for (const auto& offered : inputs.completions) {
        if (channel.completion && offered.value == *channel.completion) tolerance = offered.tolerance.in(one);
      }
      out.push_back({{"completion resistor" + number, "ohm", rectangular(value, value * tolerance)}, shift});
    } else {
      const double tolerance = inputs.halfBridge.tolerance.in(one);
      out.push_back({{"half-bridge resistor" + number, "ohm", rectangular(value, value * tolerance)}, shift});
    }
  }
}

void addLeads(const Channel& channel, std::vector<UncertainInput>& out) {
  double temperatureTolerance_K = 0, temperature_C = 20;
  for (const auto& [terminal, lead] : channel.leads) {
    const double value = lead.resistance.in(ohm);
    const auto at = terminal;
    out.push_back({{"lead " + std::string(description::name(terminal)), "ohm",
                    rectangular(value, value * lead.tolerance.in(one))},
                   [at](ChannelModel& m, double delta) {
                     m.atCalibration.lead(at) += delta * ohm;
                     m.inTest.lead(at) += delta * ohm;
                   }});
    temperatureTolerance_K = std::max(temperatureTolerance_K, lead.temperatureTolerance.in(kelvin));
    temperature_C = lead.temperature.celsius();
  }
  if (channel.leads.empty() || temperatureTolerance_K <= 0) return;
  // A share of whatever the lead's resistance turns out to be: a longer one warms by more ohms.
  std::map<Terminal, double> relativePerKelvin;
  for (const auto& [terminal, lead] : channel.leads) {
    const Temperature warmer = lead.temperature + 1.0 * kelvin;
    relativePerKelvin[terminal] = copperAt(1.0 * ohm, lead.temperature, warmer).in(ohm) - 1;
  }
  out.push_back({{"lead temperature at calibration", "degC", rectangular(temperature_C, temperatureTolerance_K)},
                 [relativePerKelvin](ChannelModel& m, double delta) {
                   for (const auto& [terminal, share] : relativePerKelvin) {
                     for (auto* circuit : {&m.atCalibration, &m.inTest}) {
                       circuit->lead(terminal) = circuit->lead(terminal) * (1 + share * delta);
                     }
                   }
                 }});
  out.push_back({{kLeadsWarming, "K", rectangular(0, temperatureTolerance_K)},
                 [relativePerKelvin](ChannelModel& m, double delta) {
                   for (const auto& [terminal, share] : relativePerKelvin) {
                     m.inTest.lead(terminal) = m.inTest.lead(terminal) * (1 + share * delta);
                   }
                 }});
}

void addShunts(const Rack& rack, const Channel& channel, std::vector<UncertainInput>& out) {
  // Shunts of one resistor move together.
  std::map<std::string, std::vector<std::size_t>> byResistor;
  for (std::size_t k = 0; k < channel.shunts.size(); ++k) byResistor[channel.shunts[k].resistor].push_back(k);
  for (const auto& [resistorName, indices] : byResistor) {
    const auto& resistor = rack.resistors.at(resistorName);
    const double value = resistor.value.in(ohm);
    const auto shift = [indices](ChannelModel& m, double delta) {
      for (const auto k : indices) m.shunts[k].resistance += delta * ohm;
    };
    const std::string quantity = "shunt resistor " + resistorName;
    if (resistor.expandedUncertainty.in(one) > 0) {
      const double u = value * resistor.expandedUncertainty.in(one) / resistor.coverageFactor;
      out.push_back({{quantity + ", certificate", "ohm", normal(value, u), quantity}, shift});
    } else {
      out.push_back({{quantity, "ohm", rectangular(value, value * resistor.tolerance.in(one)), quantity}, shift});
    }
    const double thermal = value * (resistor.temperatureCoefficient * resistor.temperatureSpan).in(one);
    if (thermal != 0) {
      out.push_back({{quantity + ", temperature", "ohm", rectangular(0, std::abs(thermal)), quantity + ", temperature"}, shift});
    }
  }
  for (std::size_t k = 0; k < channel.shunts.size(); ++k) {
    const auto& relay = channel.shunts[k].relay;
    const auto& relays = *rack.device(relay.device)->profile->relays;
    const std::string contact = "contact of relay " + relay.device + "/" + std::to_string(relay.relay);
    out.push_back({{contact, "ohm", rectangular(relays.contactResistance.in(ohm), relays.contactTolerance.in(ohm)),
                    contact},
                   [k](ChannelModel& m, double delta) { m.shunts[k].resistance += delta * ohm; }});
    if (!relays.leakage) continue;
    // Stated as "at least": a good relay lets through next to nothing, a poor one just that, few lie between. (A
    // rectangle would put the good ones outside its 95.45 %.)
    const Resistance whole = bridge::leakEquivalent(rack.resistorOf(channel.shunts[k]).value, *relays.leakage);
    const double worst_nS = 1e9 / relays.leakage->in(ohm);
    const std::string leak = "leakage of relay " + relay.device + "/" + std::to_string(relay.relay);
    out.push_back({{leak, "nS", metrology::arcsine(0.5 * worst_nS, 0.5 * worst_nS), leak},
                   [k, perNanosiemens = whole.in(ohm) / worst_nS](ChannelModel& m, double delta) {
                     m.shunts[k].resistance += delta * perNanosiemens * ohm;
                   }});
  }
}

}  // namespace

std::vector<UncertainInput> inputsOf(const Rack& rack, const Channel& channel) {
  std::vector<UncertainInput> inputs;
  const ChannelModel model = modelWithLeads(rack, channel);
  addShunts(rack, channel, inputs);
  if (channel.transducer) {
    addTransducer(*channel.transducer, inputs);
  } else {
    addArms(rack, channel, model, inputs);
  }
  addLeads(channel, inputs);
  return inputs;
}

}  // namespace shuntwright::calibration
