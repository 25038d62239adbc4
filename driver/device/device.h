#pragma once

#include <memory>
#include <string>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/core/task.h"
#include "driver/description/rack.h"
#include "driver/device/sample_block.h"
#include "driver/transport/stream.h"

namespace shuntwright::device {

struct Identity {
  std::string model;
  std::string serialNumber;
  std::string version;
};

/// One amplifier or relay board: its description, its protocol and a stream to it.
///
/// Requests from several coroutines are taken one after the other. While samples stream, answers and sample
/// lines are told apart by the profile's patterns, so relays of an amplifier can be worked while it streams.
/// One thread. Every error names the device, its port, the request and what came back, and which line of
/// the profile describes it.
class Device {
 public:
  /// Spawns the reader on the executor of the coroutine that awaits this.
  static Task<Result<std::unique_ptr<Device>>> open(const description::Device& described,
                                                    const transport::Opener& opener, Clock& clock);
  virtual ~Device() = default;

  virtual const description::Device& described() const = 0;

  /// Errors besides I/O: refused when the model or the serial number is not the one expected.
  virtual Task<Result<Identity>> identify() = 0;
  virtual Task<Result<void>> setRate(units::Frequency rate) = 0;  ///< nothing to do without set_rate
  virtual Task<Result<void>> setExcitation(units::Voltage excitation) = 0;  ///< likewise

  virtual Task<Result<void>> closeRelay(int relay) = 0;
  virtual Task<Result<void>> openRelay(int relay) = 0;
  virtual Task<Result<void>> openAllRelays() = 0;  ///< one by one where the profile has no open_all
  /// Errors: not_found when the profile has no `state` request.
  virtual Task<Result<bool>> relayClosed(int relay) = 0;

  /// Starts streaming or polling at the rate; samples queue (at most ten seconds of them: then the oldest
  /// are dropped and counted as lost) until next() takes them.
  virtual Task<Result<void>> start(units::Frequency rate) = 0;
  /// All that has come since the last call; waits until there is something. Errors: timeout at the deadline,
  /// or the reader's own error.
  virtual Task<Result<SampleBlock>> next(Instant deadline) = 0;
  /// What stands in the queue, all of it up to the next gap, without waiting; with no frame left, the gap at its end.
  virtual SampleBlock rest() = 0;
  virtual Task<Result<void>> stop() = 0;

  virtual void close() = 0;  ///< drops the connection; does not touch relays
};

}  // namespace shuntwright::device
