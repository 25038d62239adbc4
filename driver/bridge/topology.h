#pragma once

#include <array>
#include <cstddef>

#include "driver/description/wiring.h"

namespace shuntwright::bridge {

/// Which points a circuit has and what lies between them, before any resistance is known.
///
/// Nodes are numbered from 0: EXC+, EXC-, SIG+, SIG- at the instrument are always 0..3, then come the
/// instrument's other terminals, the points at the gauge and the inside of a transducer.
struct Topology {
  static constexpr int kNone = -1;
  static constexpr int kMaxNodes = 12;
  struct Branch {
    int from = kNone;
    int to = kNone;
  };

  int nodes = 0;
  std::array<int, description::kTerminals> instrument;  ///< node of each terminal at the instrument, or kNone
  std::array<int, description::kTerminals> gauge;  ///< at the gauge; a lead exists exactly where this does
  std::array<Branch, 4> arms;
  std::array<bool, 4> isGauge{};  ///< arms at the gauge's side of the leads; the others are the amplifier's
  std::array<Branch, 2> series;   ///< inside a transducer, in the EXC+ and EXC- line; kNone elsewhere

  bool hasLead(description::Terminal t) const { return gauge[static_cast<std::size_t>(t)] != kNone; }
  int node(description::Terminal t, description::Side side) const {
    return (side == description::Side::gauge ? gauge : instrument)[static_cast<std::size_t>(t)];
  }
};

/// Null when the circuit cannot be sensed but `sensed` is asked for.
const Topology* topologyOf(description::CircuitKind kind, bool sensed);

}  // namespace shuntwright::bridge
