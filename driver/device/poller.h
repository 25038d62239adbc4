#pragma once

#include <cstdint>
#include <memory>
#include <optional>

#include "driver/core/async.h"
#include "driver/device/connection.h"

namespace shuntwright::device {

/// Asks a polled amplifier for all its inputs at exact ticks: tick k is due k / rate after the start, however
/// long the answers take. Ticks that pass while an answer is awaited are skipped and counted as lost. A
/// reading is timed half way between request and answer.
class Poller : public std::enable_shared_from_this<Poller> {
 public:
  Poller(std::shared_ptr<Connection> connection, units::Frequency rate);

  /// Spawns the polling on the executor of the coroutine that awaits this.
  Task<void> start();
  /// Ends it; awaits a reading that is under way.
  Task<void> stop();
  /// Ends it without awaiting anything.
  void halt();

  /// The error of the last reading, if it failed, once.
  std::optional<Error> takeError() { return std::exchange(error_, std::nullopt); }

 private:
  Task<void> run();
  Task<void> read();
  Instant tick(std::uint64_t number) const;

  std::shared_ptr<Connection> connection_;
  double rate_Hz_;
  Instant start_{};
  bool wanted_ = false;
  bool running_ = false;
  Event changed_;
  std::optional<Error> error_;
  std::vector<float> ratio_;
  std::vector<std::uint8_t> flags_;
};

}  // namespace shuntwright::device
