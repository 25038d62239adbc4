#pragma once

#include "driver/core/bytes.h"
#include "driver/core/clock.h"

namespace shuntwright::sim {

/// A simulated device: bytes in, bytes out, no I/O and no clock of its own.
///
/// The host calls advance(now) whenever nextEvent() is reached and before each feed(), and sends what take()
/// gives. Nothing happens between events.
class Device {
 public:
  virtual ~Device() = default;
  virtual void feed(ByteView bytes, Instant now) = 0;
  virtual void advance(Instant now) = 0;
  virtual Bytes take() = 0;                  ///< everything it has sent since the last call
  virtual Instant nextEvent() const = 0;     ///< Instant::max(): nothing before the next feed()
};

}  // namespace shuntwright::sim
