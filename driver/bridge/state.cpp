#include "driver/bridge/state.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <complex>

#include "driver/bridge/network.h"
#include "driver/bridge/topology.h"

namespace shuntwright::bridge {

using description::CircuitKind;
using description::Side;
using description::Terminal;

namespace {

// Below this a wire is taken to be this: see Network for why that costs nothing.
constexpr double kLeastResistance = 1e-30;

// Step along the imaginary axis for derivatives: f(R + ih) = f(R) + ih f'(R), with no difference taken
// (Squire and Trapp, from memory). Works at R = 0 too, where a difference of conductances would not.
constexpr double kImaginaryStep = 1e-20;

double conductance(double resistance) {
  return 1.0 / std::max(resistance, kLeastResistance);
}

std::complex<double> conductance(std::complex<double> resistance) {
  return 1.0 / (resistance == 0.0 ? std::complex<double>(kLeastResistance) : resistance);
}

double ohms(units::Resistance r) {
  return r.in(units::ohm);
}

double armResistance(const Arm& arm, double strain) {
  return ohms(arm.resistance) * (1 + arm.relativePerStrain * strain);
}

// NaN fails each of these as well.
bool notNegative(double resistance) {
  return resistance >= 0;
}
bool positive(double resistance) {
  return resistance > 0;
}

std::string terminalList(const Topology& topology, Side side) {
  std::string list;
  for (std::size_t i = 0; i < description::kTerminals; ++i) {
    const auto t = static_cast<Terminal>(i);
    if (topology.node(t, side) == Topology::kNone) continue;
    if (!list.empty()) list += ", ";
    list += description::name(t);
  }
  return list;
}

std::unexpected<Error> noSuchPath(const Circuit& circuit, const Topology& topology, const ShuntPath& path) {
  const auto [first, second] = path.across;
  const bool firstThere = topology.node(first, path.side) != Topology::kNone;
  const bool secondThere = topology.node(second, path.side) != Topology::kNone;
  const auto circuitName = description::name(circuit.kind);
  const auto sideName = description::name(path.side);
  if (firstThere && secondThere) {
    return fail(ErrorCode::bad_use,
                fmt::format("a shunt from {} to {} has both ends at one point: at the {} of a {} circuit "
                            "they are joined",
                            description::name(first), description::name(second), sideName, circuitName),
                {}, "name two different points");
  }
  const auto missing = firstThere ? second : first;
  return fail(ErrorCode::bad_use,
              fmt::format("a shunt from {} to {} cannot be: a {} circuit{} has no {} at the {}",
                          description::name(first), description::name(second), circuitName,
                          circuit.sensed ? " with sense leads" : "", description::name(missing), sideName),
              {}, fmt::format("at the {} it has {}", sideName, terminalList(topology, path.side)));
}

Result<const Topology*> checked(const Circuit& circuit, double strain, std::span<const ShuntPath> shunts) {
  const Topology* topology = topologyOf(circuit.kind, circuit.sensed);
  if (!topology) {
    return fail(ErrorCode::bad_use,
                fmt::format("a {} circuit has no sense leads", description::name(circuit.kind)), {},
                "sense the excitation only of full bridges and transducers");
  }
  for (std::size_t i = 0; i < description::kTerminals; ++i) {
    const auto t = static_cast<Terminal>(i);
    if (topology->hasLead(t) && !notNegative(ohms(circuit.lead(t)))) {
      return fail(ErrorCode::bad_use, fmt::format("the {} lead has {:.6g} ohm; a resistance is 0 or more",
                                                  description::name(t), ohms(circuit.lead(t))));
    }
  }
  for (std::size_t i = 0; i < 4; ++i) {
    const double resistance = armResistance(circuit.arms[i], strain);
    if (positive(resistance)) continue;
    return fail(
        ErrorCode::bad_use,
        fmt::format("arm {} of the {} circuit has {:.6g} ohm at {:.6g} microstrain; an arm is more than 0",
                    i + 1, description::name(circuit.kind), resistance, strain * 1e6));
  }
  if (!positive(ohms(circuit.inputResistance))) {
    return fail(ErrorCode::bad_use,
                fmt::format("the amplifier's input resistance is {:.6g} ohm; it is more than 0",
                            ohms(circuit.inputResistance)));
  }
  if (!notNegative(ohms(circuit.excitationSeries))) {
    return fail(
        ErrorCode::bad_use,
        fmt::format("the resistance inside the transducer's excitation lines is {:.6g} ohm; it is 0 or more",
                    ohms(circuit.excitationSeries)),
        {}, "a transducer's input resistance is not below its output resistance");
  }
  for (const auto& path : shunts) {
    if (!exists(circuit, path)) return noSuchPath(circuit, *topology, path);
    if (!notNegative(ohms(path.resistance))) {
      return fail(ErrorCode::bad_use,
                  fmt::format("a shunt has {:.6g} ohm; a resistance is 0 or more", ohms(path.resistance)));
    }
  }
  return topology;
}

template <class Scalar>
struct Solution {
  Scalar ratio{};
  Scalar slope{};
};

template <class Scalar>
Solution<Scalar> solve(const Circuit& circuit, const Topology& topology, double strain,
                       std::span<const ShuntPath> shunts, Scalar addedToLeads, bool wantSlope) {
  using Net = Network<Scalar, Topology::kMaxNodes>;
  constexpr int kSigPlus = 2, kSigMinus = 3, kSensePlus = 4, kSenseMinus = 5;
  Net network(topology.nodes);
  for (std::size_t i = 0; i < 4; ++i) {
    network.add(topology.arms[i].from, topology.arms[i].to,
                conductance(armResistance(circuit.arms[i], strain)));
  }
  for (std::size_t i = 0; i < description::kTerminals; ++i) {
    if (topology.gauge[i] == Topology::kNone) continue;
    network.add(topology.instrument[i], topology.gauge[i],
                conductance(Scalar(ohms(circuit.leads[i])) + addedToLeads));
  }
  for (const auto& line : topology.series) {
    if (line.from != Topology::kNone) {
      network.add(line.from, line.to, conductance(ohms(circuit.excitationSeries)));
    }
  }
  network.add(kSigPlus, kSigMinus, conductance(ohms(circuit.inputResistance)));
  for (const auto& path : shunts) {
    network.add(topology.node(path.across.first, path.side), topology.node(path.across.second, path.side),
                conductance(ohms(path.resistance)));
  }
  network.eliminate();

  const int needed = wantSlope ? topology.nodes : circuit.sensed ? kSenseMinus + 1 : kSigMinus + 1;
  const auto v = network.voltages(needed);
  const auto at = [](const auto& nodes, int node) { return nodes[static_cast<std::size_t>(node)]; };
  const Scalar excitation = circuit.sensed ? at(v, kSensePlus) - at(v, kSenseMinus) : Scalar(1);
  Solution<Scalar> out;
  out.ratio = (at(v, kSigPlus) - at(v, kSigMinus)) / excitation;
  if (!wantSlope) return out;

  // A small change dR of an arm that carries i acts like a source i dR in series with it: a current
  // i dR / R driven round the arm.
  typename Net::Nodes current{};
  for (std::size_t i = 0; i < 4; ++i) {
    const auto& arm = circuit.arms[i];
    if (arm.relativePerStrain == 0) continue;
    const double resistance = armResistance(arm, strain);
    const double change = ohms(arm.resistance) * arm.relativePerStrain;
    const auto& ends = topology.arms[i];
    const Scalar driven = (at(v, ends.from) - at(v, ends.to)) / resistance * (change / resistance);
    current[static_cast<std::size_t>(ends.from)] += driven;
    current[static_cast<std::size_t>(ends.to)] -= driven;
  }
  const auto dv = network.response(current);
  const Scalar signalChange = at(dv, kSigPlus) - at(dv, kSigMinus);
  const Scalar excitationChange = circuit.sensed ? at(dv, kSensePlus) - at(dv, kSenseMinus) : Scalar(0);
  out.slope = (signalChange - out.ratio * excitationChange) / excitation;
  return out;
}

Result<> finite(double value) {
  if (std::isfinite(value)) return {};
  return fail(ErrorCode::bad_use, "the circuit does not hang together: some terminal is connected to nothing",
              {}, "give every arm a finite resistance");
}

}  // namespace

Result<units::Ratio> ratio(const Circuit& circuit, units::Strain strain, std::span<const ShuntPath> shunts) {
  const double e = strain.in(units::strain);
  const auto topology = checked(circuit, e, shunts);
  if (!topology) return std::unexpected(topology.error());
  const double r = solve<double>(circuit, **topology, e, shunts, 0.0, false).ratio;
  if (auto ok = finite(r); !ok) return std::unexpected(ok.error());
  return r * units::volt_per_volt;
}

bool exists(const Circuit& circuit, const ShuntPath& path) {
  const Topology* topology = topologyOf(circuit.kind, circuit.sensed);
  if (!topology) return false;
  const int first = topology->node(path.across.first, path.side);
  const int second = topology->node(path.across.second, path.side);
  return first != Topology::kNone && second != Topology::kNone && first != second;
}

Result<State> stateOf(const Circuit& circuit, double strain, std::span<const ShuntPath> shunts) {
  const auto topology = checked(circuit, strain, shunts);
  if (!topology) return std::unexpected(topology.error());
  const auto found = solve<double>(circuit, **topology, strain, shunts, 0.0, true);
  if (auto ok = finite(found.ratio + found.slope); !ok) return std::unexpected(ok.error());
  return State{.ratio_V_per_V = found.ratio, .slope = found.slope};
}

Result<State> stateWithLeadDerivatives(const Circuit& circuit, double strain,
                                       std::span<const ShuntPath> shunts) {
  auto state = stateOf(circuit, strain, shunts);
  if (!state) return state;
  const Topology& topology = *topologyOf(circuit.kind, circuit.sensed);
  const auto moved =
      solve<std::complex<double>>(circuit, topology, strain, shunts, {0.0, kImaginaryStep}, true);
  state->ratioPerOhm = moved.ratio.imag() / kImaginaryStep;
  state->slopePerOhm = moved.slope.imag() / kImaginaryStep;
  return state;
}

double searchRange(const Circuit& circuit) {
  double range = circuit.kind == CircuitKind::transducer ? 10.0 : 0.1;
  for (const auto& arm : circuit.arms) {
    if (arm.relativePerStrain != 0) range = std::min(range, 0.9 / std::abs(arm.relativePerStrain));
  }
  return range;
}

}  // namespace shuntwright::bridge
