#pragma once

#include <functional>
#include <vector>

#include "driver/core/clock.h"
#include "driver/core/random.h"
#include "driver/description/profile.h"

namespace shuntwright::sim {

/// Relays with the time they take: a contact bounces while it operates and opens after its release time.
/// Commands and contacts are told apart: read-back shows the contact.
class RelayBoard {
 public:
  /// Told of each contact that changes. `relay` as numbered on the wire.
  using Contact = std::function<void(int relay, bool closed, Instant when)>;

  RelayBoard(const description::Relays& described, Random random, Contact contact);

  bool has(int relay) const { return relay >= described_.first && relay < described_.first + described_.count; }
  void command(int relay, bool close, Instant now);
  bool closed(int relay) const { return relays_[index(relay)].closed; }

  void setDead(int relay) { relays_[index(relay)].dead = true; }
  void setWelded(int relay) { relays_[index(relay)].welded = true; }

  void advance(Instant now);
  Instant next() const;

 private:
  struct Event {
    Instant when;
    bool closed;
  };
  struct Relay {
    bool closed = false;
    bool dead = false, welded = false;
    std::vector<Event> coming;
  };
  std::size_t index(int relay) const { return static_cast<std::size_t>(relay - described_.first); }

  description::Relays described_;
  Random random_;
  Contact contact_;
  std::vector<Relay> relays_;
};

}  // namespace shuntwright::sim
