#pragma once

#include <optional>

#include "driver/core/bytes.h"
#include "driver/core/clock.h"

namespace shuntwright::sim {

/// A simulated device: bytes in, bytes out, no I/O and no clock of its own.
///
/// The host calls advance(now) whenever nextEvent() is reached and before each feed(), and sends what take()
/// gives. Nothing happens between events. A device that is not there takes no bytes and gives none.
class Device {
 public:
  virtual ~Device() = default;
  /// A client has just connected, or reads again after a long while: what was under way is gone.
  virtual void connected(Instant now) = 0;
  virtual void feed(ByteView bytes, Instant now) = 0;
  virtual void advance(Instant now) = 0;
  virtual Bytes take() = 0;                  ///< everything it has sent since the last call
  virtual Instant nextEvent() const = 0;     ///< Instant::max(): nothing before the next feed()
  /// Nothing: it can be reached. Else its plug is out until then; Instant::max(): for good.
  virtual std::optional<Instant> absentUntil(Instant now) const = 0;
};

}  // namespace shuntwright::sim
