#include "driver/bridge/topology.h"

#include <initializer_list>

namespace shuntwright::bridge {

using description::CircuitKind;
using description::Side;
using description::Terminal;

namespace {

constexpr int kKinds = static_cast<int>(CircuitKind::transducer) + 1;

constexpr std::size_t at(Terminal t) {
  return static_cast<std::size_t>(t);
}

/// The leads of a circuit, its sense leads apart, and which of its arms are at the gauge.
struct Wiring {
  std::array<Terminal, 4> leads{};
  int leadCount = 0;
  std::array<bool, 4> armAtGauge{};
};

constexpr Wiring wiring(std::initializer_list<Terminal> leads, std::array<bool, 4> armAtGauge) {
  Wiring out;
  for (Terminal t : leads) out.leads[static_cast<std::size_t>(out.leadCount++)] = t;
  out.armAtGauge = armAtGauge;
  return out;
}

constexpr Wiring wiringOf(CircuitKind kind) {
  using enum Terminal;
  switch (kind) {
    case CircuitKind::quarter_2_wire:
      return wiring({sig_plus, exc_minus}, {true, false, false, false});
    case CircuitKind::quarter_3_wire:
      return wiring({sig_plus, exc_minus, comp}, {true, false, false, false});
    case CircuitKind::half_bending:
    case CircuitKind::half_poisson:
      return wiring({exc_plus, sig_plus, exc_minus}, {true, true, false, false});
    case CircuitKind::half_opposite:
      return wiring({exc_plus, exc_minus, sig_plus, sig_minus}, {true, false, true, false});
    case CircuitKind::full_bending:
    case CircuitKind::full_poisson:
    case CircuitKind::full_bending_poisson:
    case CircuitKind::full_shear:
    case CircuitKind::transducer:
      break;
  }
  return wiring({exc_plus, exc_minus, sig_plus, sig_minus}, {true, true, true, true});
}

constexpr bool canBeSensed(CircuitKind kind) {
  for (bool gauge : wiringOf(kind).armAtGauge) {
    if (!gauge) return false;
  }
  return true;
}

constexpr Topology make(CircuitKind kind, bool sensed) {
  Topology t;
  t.instrument.fill(Topology::kNone);
  t.gauge.fill(Topology::kNone);
  for (Terminal always : {Terminal::exc_plus, Terminal::exc_minus, Terminal::sig_plus, Terminal::sig_minus}) {
    t.instrument[at(always)] = t.nodes++;
  }
  if (sensed) {
    t.instrument[at(Terminal::sense_plus)] = t.nodes++;
    t.instrument[at(Terminal::sense_minus)] = t.nodes++;
  }
  if (kind == CircuitKind::quarter_3_wire) t.instrument[at(Terminal::comp)] = t.nodes++;

  const Wiring w = wiringOf(kind);
  t.isGauge = w.armAtGauge;
  for (int i = 0; i < w.leadCount; ++i) {
    const Terminal lead = w.leads[static_cast<std::size_t>(i)];
    // The completion lead and the signal lead meet at the gauge's tab.
    t.gauge[at(lead)] = lead == Terminal::comp ? t.gauge[at(Terminal::sig_plus)] : t.nodes++;
  }
  if (sensed) {
    t.gauge[at(Terminal::sense_plus)] = t.gauge[at(Terminal::exc_plus)];
    t.gauge[at(Terminal::sense_minus)] = t.gauge[at(Terminal::exc_minus)];
  }

  auto corners = t.gauge;  // what the arms at the gauge meet at
  if (kind == CircuitKind::transducer) {
    for (std::size_t line = 0; line < 2; ++line) {
      const Terminal terminal = line == 0 ? Terminal::exc_plus : Terminal::exc_minus;
      t.series[line] = {corners[at(terminal)], t.nodes};
      corners[at(terminal)] = t.nodes++;
    }
  }
  constexpr std::array<std::array<Terminal, 2>, 4> kEnds{{{Terminal::sig_plus, Terminal::exc_minus},
                                                          {Terminal::exc_plus, Terminal::sig_plus},
                                                          {Terminal::exc_plus, Terminal::sig_minus},
                                                          {Terminal::sig_minus, Terminal::exc_minus}}};
  for (std::size_t arm = 0; arm < 4; ++arm) {
    const auto& ends = w.armAtGauge[arm] ? corners : t.instrument;
    t.arms[arm] = {ends[at(kEnds[arm][0])], ends[at(kEnds[arm][1])]};
  }
  if (kind == CircuitKind::quarter_3_wire) t.arms[1].to = t.instrument[at(Terminal::comp)];
  return t;
}

constexpr auto makeAll() {
  std::array<std::array<Topology, 2>, kKinds> all;
  for (int kind = 0; kind < kKinds; ++kind) {
    const auto k = static_cast<CircuitKind>(kind);
    all[static_cast<std::size_t>(kind)] = {make(k, false), make(k, canBeSensed(k))};
  }
  return all;
}

constexpr auto kTopologies = makeAll();
static_assert(kTopologies[static_cast<std::size_t>(CircuitKind::transducer)][1].nodes == Topology::kMaxNodes);

}  // namespace

const Topology* topologyOf(CircuitKind kind, bool sensed) {
  if (sensed && !canBeSensed(kind)) return nullptr;
  return &kTopologies[static_cast<std::size_t>(kind)][sensed ? 1 : 0];
}

}  // namespace shuntwright::bridge
