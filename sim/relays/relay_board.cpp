#include "sim/relays/relay_board.h"

#include <algorithm>

namespace shuntwright::sim {

RelayBoard::RelayBoard(const description::Relays& described, Random random, Contact contact)
    : described_(described),
      random_(random),
      contact_(std::move(contact)),
      relays_(static_cast<std::size_t>(described.count)) {}

void RelayBoard::command(int relay, bool close, Instant now) {
  advance(now);
  Relay& one = relays_[index(relay)];
  one.coming.clear();
  if (close == one.closed || (close && one.dead) || (!close && one.welded)) return;
  const double whole_s = seconds(close ? described_.operateTime : described_.releaseTime);
  if (!close) {
    one.coming.push_back({now + fromSeconds(whole_s * random_.uniform(0.3, 0.9)), false});
    return;
  }
  // First touch, then a few bounces; the profile's operate time includes them.
  double at_s = whole_s * random_.uniform(0.4, 0.6);
  const auto bounces = random_.below(4);
  const double step_s = (0.95 * whole_s - at_s) / (2.0 * static_cast<double>(bounces) + 1);
  one.coming.push_back({now + fromSeconds(at_s), true});
  for (std::uint64_t k = 0; k < bounces; ++k) {
    one.coming.push_back({now + fromSeconds(at_s += step_s * random_.uniform(0.2, 1)), false});
    one.coming.push_back({now + fromSeconds(at_s += step_s * random_.uniform(0.2, 1)), true});
  }
}

void RelayBoard::advance(Instant now) {
  for (std::size_t k = 0; k < relays_.size(); ++k) {
    auto& coming = relays_[k].coming;
    std::size_t done = 0;
    while (done < coming.size() && coming[done].when <= now) {
      relays_[k].closed = coming[done].closed;
      contact_(described_.first + static_cast<int>(k), coming[done].closed, coming[done].when);
      ++done;
    }
    coming.erase(coming.begin(), coming.begin() + static_cast<std::ptrdiff_t>(done));
  }
}

Instant RelayBoard::next() const {
  Instant earliest = Instant::max();
  for (const auto& relay : relays_) {
    if (!relay.coming.empty()) earliest = std::min(earliest, relay.coming.front().when);
  }
  return earliest;
}

}  // namespace shuntwright::sim
