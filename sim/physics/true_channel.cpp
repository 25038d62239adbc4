#include "sim/physics/true_channel.h"

#include <algorithm>
#include <cmath>

#include "sim/physics/node_circuit.h"

namespace shuntwright::sim {

using namespace units;
using description::CircuitKind;
using description::Side;
using description::Terminal;

namespace {

// Nodes: the terminals at the instrument by their own number, the same at the gauge, the inside of a transducer.
constexpr std::size_t at(Terminal t, Side side) {
  return static_cast<std::size_t>(t) + (side == Side::gauge ? description::kTerminals : 0);
}
// Terminals that a circuit does not lead out at the gauge leave their numbers free for a transducer's inside.
constexpr std::size_t kInnerPlus = at(Terminal::comp, Side::gauge);
constexpr std::size_t kInnerMinus = at(Terminal::comp, Side::instrument);
static_assert(2 * description::kTerminals == NodeCircuit::kNodes);

bool quarter(CircuitKind kind) { return kind == CircuitKind::quarter_2_wire || kind == CircuitKind::quarter_3_wire; }

constexpr double kWorstCrimp_ohm = 0.02;
constexpr std::uint64_t kLeakageStream = 900;

double off(Random& random, double value, double tolerance) { return value * (1 + random.uniform(-tolerance, tolerance)); }

double drawn(const description::Resistor& resistor, const Imperfections& imperfections, Random& random) {
  double value = resistor.value.in(ohm);
  if (resistor.expandedUncertainty.in(one) > 0) {
    const double u = resistor.expandedUncertainty.in(one) / resistor.coverageFactor;
    value *= 1 + imperfections.resistors * u * random.normal();
  } else {
    value = off(random, value, imperfections.resistors * resistor.tolerance.in(one));
  }
  return value * (1 + resistor.temperatureCoefficient.in(per_kelvin) * random.uniform(-1, 1) *
                          resistor.temperatureSpan.in(kelvin));
}

}  // namespace

std::map<std::string, double> drawnResistors(const description::Rack& rack, const Imperfections& imperfections,
                                             const Random& random) {
  std::map<std::string, double> out;
  for (const auto& [name, resistor] : rack.resistors) {
    Random own = random.fork(out.size());
    out[name] = drawn(resistor, imperfections, own);
  }
  return out;
}

Hall Hall::drawn(Random random) {
  Hall hall;
  hall.start = 0.4 * random.normal();
  hall.warming = random.uniform();
  return hall;
}

TrueChannel::TrueChannel(const description::Rack& rack, const description::Channel& channel,
                         const Imperfections& imperfections, const ChannelFaults& faults, Random random, Shared shared)
    : channel_(&channel) {
  const auto& inputs = *rack.device(channel.device)->profile->inputs;
  inputResistance_ohm_ = inputs.inputResistance.in(ohm);
  const auto weights = description::armWeights(channel.circuit, channel.poisson);
  if (channel.transducer) {
    const auto& sheet = *channel.transducer;
    const double out = off(random, sheet.outputResistance.in(ohm), imperfections.gauges * sheet.outputTolerance.in(one));
    const double in = off(random, sheet.inputResistance.in(ohm), imperfections.gauges * sheet.inputTolerance.in(one));
    gaugeFactor_ = off(random, 1, imperfections.gaugeFactors * sheet.sensitivityTolerance.in(one));
    excitationSeries_ohm_ = (in - out) / 2;
    const double x = sheet.sensitivity.in(volt_per_volt) * in / out * gaugeFactor_;
    for (std::size_t k = 0; k < 4; ++k) {
      arms_[k] = off(random, out, imperfections.completions * 1e-4);  // resistors that trim it
      relativePerStrain_[k] = weights[k] * x;
    }
  } else {
    const auto& sheet = rack.gaugeOf(channel);
    const double deviation = imperfections.batches * shared.batch + (1 - imperfections.batches) * random.uniform(-1, 1);
    gaugeFactor_ = sheet.factor.value() * (1 + imperfections.gaugeFactors * sheet.factorTolerance.in(one) * deviation);
    double completion_tolerance = 0;
    for (const auto& offered : inputs.completions) {
      if (channel.completion && offered.value == *channel.completion) completion_tolerance = offered.tolerance.in(one);
    }
    for (std::size_t k = 0; k < 4; ++k) {
      if (weights[k] != 0) {
        const auto gauge = rack.gaugeOf(channel, k);
        const double share = gauge.resistance.tolerance.in(one);
        // A meter's uncertainty is expanded, k = 2.
        arms_[k] = gauge.resistance.value.in(ohm);
        arms_[k] = gauge.measured ? arms_[k] * (1 + imperfections.gauges * share / 2 * random.normal())
                                  : off(random, arms_[k], imperfections.gauges * share);
        // One deviation for all: gauges of one packet.
        relativePerStrain_[k] = weights[k] * gauge.factor.value() *
                                (1 + imperfections.gaugeFactors * gauge.factorTolerance.in(one) * deviation);
      } else if (k == 1 || (k == 3 && channel.circuit == CircuitKind::half_opposite)) {
        const double nominal = channel.completion ? channel.completion->in(ohm) : sheet.resistance.value.in(ohm);
        arms_[k] = off(random, nominal, imperfections.completions * completion_tolerance);
      } else {
        arms_[k] = off(random, inputs.halfBridge.value.in(ohm),
                       imperfections.completions * inputs.halfBridge.tolerance.in(one));
      }
    }
  }
  // Each wire off a drum of its own, and ended in a crimp, which only adds.
  double tolerance_K = 0;
  for (const auto& [terminal, lead] : channel.leads) {
    leads_[static_cast<std::size_t>(terminal)] =
        off(random, lead.resistance.in(ohm), imperfections.leads * lead.tolerance.in(one)) +
        imperfections.leads * random.uniform(0, kWorstCrimp_ohm);
    tolerance_K = std::max(tolerance_K, lead.temperatureTolerance.in(kelvin));
  }
  if (faults.openLead) {
    const auto opened = channel.leads.contains(Terminal::sig_plus) ? Terminal::sig_plus : channel.leads.begin()->first;
    leads_[static_cast<std::size_t>(opened)] = 1e9;
  }
  if (imperfections.leadsWarm) {
    warmStart_K_ = tolerance_K * std::clamp(shared.hall.start + 0.2 * random.uniform(-1, 1), -1.0, 1.0);
    warmEnd_K_ = warmStart_K_ + tolerance_K * shared.hall.warming * random.uniform(0.3, 1);
    warmTime_s_ = random.uniform(300, 1200);
  }
  for (const auto& shunt : channel.shunts) {
    const auto known = shared.resistors.find(shunt.resistor);
    const double value =
        known != shared.resistors.end() ? known->second : drawn(rack.resistorOf(shunt), imperfections, random);
    TrueShunt one{shunt, value * faults.shuntScale};
    // Insulation is stated as a lower bound; what it really is lies anywhere above, by decades.
    const auto* board = rack.device(shunt.relay.device);
    if (board && board->profile->relays && board->profile->relays->leakage) {
      one.leakage_ohm = board->profile->relays->leakage->in(ohm) * std::pow(10, random.fork(kLeakageStream + shunts_.size()).uniform(0, 2));
    }
    shunts_.push_back(one);
  }
}

void TrueChannel::hangIn(double warmer_K, double warmsBy_K) {
  warmStart_K_ = warmer_K;
  warmEnd_K_ = warmer_K + warmsBy_K;
  warmTime_s_ = 300;
}

double TrueChannel::leadWarming_K(double time_s) const {
  return warmStart_K_ + (warmEnd_K_ - warmStart_K_) * (1 - std::exp(-std::max(0.0, time_s) / warmTime_s_));
}

double TrueChannel::lead_ohm(Terminal terminal, double warmer_K) const {
  const double alpha = 0.00393, stated_C = channel_->leads.at(terminal).temperature.celsius();
  const double warmth = (1 + alpha * (stated_C + warmer_K - 20)) / (1 + alpha * (stated_C - 20));
  return leads_[static_cast<std::size_t>(terminal)] * warmth;
}

double TrueChannel::ratio(double strainValue, double leadsWarmer_K) const {
  const CircuitKind kind = channel_->circuit;
  NodeCircuit c;
  const auto inst = [](Terminal t) { return at(t, Side::instrument); };
  const auto tab = [kind](Terminal t) {
    // Both leads of a 3-wire quarter bridge meet at the gauge's one tab.
    return at(quarter(kind) && t == Terminal::comp ? Terminal::sig_plus : t, Side::gauge);
  };
  c.hold(inst(Terminal::exc_plus), 1);
  c.hold(inst(Terminal::exc_minus), 0);
  for (const auto& [terminal, lead] : channel_->leads) {
    std::size_t far = tab(terminal);
    if (terminal == Terminal::sense_plus) far = tab(Terminal::exc_plus);
    if (terminal == Terminal::sense_minus) far = tab(Terminal::exc_minus);
    c.connect(inst(terminal), far, lead_ohm(terminal, leadsWarmer_K));
  }
  std::array<double, 4> arm{};
  for (std::size_t k = 0; k < 4; ++k) arm[k] = arms_[k] * (1 + relativePerStrain_[k] * strainValue);

  const auto EP = Terminal::exc_plus, EM = Terminal::exc_minus, SP = Terminal::sig_plus, SM = Terminal::sig_minus;
  const auto innerHalfBridge = [&] {
    c.connect(inst(EP), inst(SM), arm[2]);
    c.connect(inst(SM), inst(EM), arm[3]);
  };
  switch (kind) {
    case CircuitKind::quarter_2_wire:
      c.connect(tab(SP), tab(EM), arm[0]);
      c.connect(inst(EP), inst(SP), arm[1]);
      innerHalfBridge();
      break;
    case CircuitKind::quarter_3_wire:
      c.connect(tab(SP), tab(EM), arm[0]);
      c.connect(inst(EP), inst(Terminal::comp), arm[1]);
      innerHalfBridge();
      break;
    case CircuitKind::half_bending:
    case CircuitKind::half_poisson:
      c.connect(tab(SP), tab(EM), arm[0]);
      c.connect(tab(EP), tab(SP), arm[1]);
      innerHalfBridge();
      break;
    case CircuitKind::half_opposite:
      c.connect(tab(SP), tab(EM), arm[0]);
      c.connect(inst(EP), inst(SP), arm[1]);
      c.connect(tab(EP), tab(SM), arm[2]);
      c.connect(inst(SM), inst(EM), arm[3]);
      break;
    case CircuitKind::full_bending:
    case CircuitKind::full_poisson:
    case CircuitKind::full_bending_poisson:
    case CircuitKind::full_shear:
    case CircuitKind::transducer: {
      std::size_t plus = tab(EP), minus = tab(EM);
      if (kind == CircuitKind::transducer && excitationSeries_ohm_ > 0) {
        c.connect(plus, kInnerPlus, excitationSeries_ohm_);
        c.connect(minus, kInnerMinus, excitationSeries_ohm_);
        plus = kInnerPlus;
        minus = kInnerMinus;
      }
      c.connect(tab(SP), minus, arm[0]);
      c.connect(plus, tab(SP), arm[1]);
      c.connect(plus, tab(SM), arm[2]);
      c.connect(tab(SM), minus, arm[3]);
      break;
    }
  }
  c.connect(inst(SP), inst(SM), inputResistance_ohm_);
  for (const auto& shunt : shunts_) {
    if (!shunt.closed && shunt.leakage_ohm <= 0) continue;
    const auto [a, b] = shunt.described.across;
    const bool near = shunt.described.side == Side::instrument;
    c.connect(near ? inst(a) : tab(a), near ? inst(b) : tab(b), shunt.resistor_ohm + (shunt.closed ? shunt.contact_ohm : shunt.leakage_ohm));
  }
  const auto v = c.solve();
  const double excitation =
      channel_->sensed ? v[inst(Terminal::sense_plus)] - v[inst(Terminal::sense_minus)] : 1.0;
  return (v[inst(SP)] - v[inst(SM)]) / excitation;
}

}  // namespace shuntwright::sim
