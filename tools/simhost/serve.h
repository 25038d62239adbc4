#pragma once

#include <memory>
#include <string>

#include "driver/core/clock.h"
#include "driver/core/task.h"
#include "driver/transport/stream.h"
#include "sim/amplifier/bench.h"

namespace shuntwright::simhost {

/// Joins a simulated device to a stream until the other end goes, or the device's plug is pulled: bytes in, bytes
/// out, and its own events in between. Over a memory pair, a TCP connection or a pty alike. Device and clock must outlive it.
Task<void> serve(std::shared_ptr<transport::Stream> stream, sim::Device& device, Clock& clock);

/// Opens every device of a rack as a simulated one in memory. Bench and clock must outlive the streams.
transport::Opener memoryOpener(sim::Bench& bench, Clock& clock);

/// A clock that runs `speed` times as fast as another one, from its own start on.
class ScaledClock final : public Clock {
 public:
  ScaledClock(Clock& real, double speed) : real_(real), speed_(speed), start_(real.now()) {}
  Instant now() const override;
  Ticket at(Instant when, std::function<void()> callback) override;
  void cancel(Ticket ticket) override { real_.cancel(ticket); }

 private:
  Clock& real_;
  double speed_;
  Instant start_;
};

}  // namespace shuntwright::simhost
