#pragma once

#include <cstdint>
#include <memory>
#include <string>
#include <vector>

#include "driver/core/clock.h"
#include "driver/description/rack.h"
#include "driver/units/units.h"
#include "sim/amplifier/device.h"
#include "sim/fault/scenario.h"

namespace shuntwright::sim {

/// A whole rack, simulated: every device, the circuits between them and the specimen, with a truth of its own
/// drawn from the seed. The same rack, scenario, seed and calls give the same bytes.
class Bench {
 public:
  Bench(const description::Rack& rack, const Scenario& scenario, std::uint64_t seed, Instant start);
  ~Bench();
  Bench(Bench&&) noexcept;

  Device& device(const std::string& name);

  // What only the simulator knows; for the demo's table and the tests.
  struct Truth {
    units::Strain strain;              ///< at the gauge, or fraction of rated value for a transducer
    units::GaugeFactor gaugeFactor;
    units::Resistance gaugeResistance;
    units::Ratio noiselessRatio;       ///< at the amplifier's input
    double amplifierSpan = 1;
  };
  Truth truth(const std::string& channel, Instant when) const;
  bool relayClosed(const description::RelayRef& relay) const;
  std::vector<description::RelayRef> closedRelays() const;
  /// Every relay operation, for tests that ask in which order things happened.
  struct RelayEvent {
    Instant when;
    description::RelayRef relay;
    bool closed;
  };
  const std::vector<RelayEvent>& relayEvents() const;

  /// The load programme starts when the load test does; before that the load is 0.
  void startLoad(Instant when);

 private:
  struct State;
  std::unique_ptr<State> state_;
};

}  // namespace shuntwright::sim
