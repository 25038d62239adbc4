#pragma once

#include <chrono>
#include <cstdint>
#include <functional>
#include <memory>
#include <string>
#include <utility>
#include <vector>

#include "driver/core/task.h"

namespace boost::asio {
class io_context;
}

namespace shuntwright {

using Nanoseconds = std::chrono::nanoseconds;

/// A moment in UTC. Clocks never step backwards: the real one runs on the monotonic clock from the UTC
/// time at which it was made.
using Instant = std::chrono::time_point<std::chrono::system_clock, Nanoseconds>;

/// RFC 3339 in UTC with milliseconds: "2026-05-04T09:30:00.000Z".
std::string rfc3339(Instant when);

inline double seconds(Nanoseconds duration) {
  return std::chrono::duration<double>(duration).count();
}
inline Nanoseconds fromSeconds(double value) {
  return std::chrono::duration_cast<Nanoseconds>(std::chrono::duration<double>(value));
}

/// Time, passed in. Everything that waits does so through one of these.
class Clock {
 public:
  using Ticket = std::uint64_t;  // 0 is never given out

  virtual ~Clock() = default;
  virtual Instant now() const = 0;

  /// Runs `callback` once from the event loop at or after `when`, unless cancelled first.
  virtual Ticket at(Instant when, std::function<void()> callback) = 0;
  virtual void cancel(Ticket ticket) = 0;  ///< unknown or finished tickets are ignored

  /// Expires with the clock, for waits that may be torn down after it.
  std::weak_ptr<const void> alive() const { return alive_; }

 private:
  std::shared_ptr<const void> alive_ = std::make_shared<char>();
};

/// Awaitable waits over any clock; cancellation ends them at once.
Task<void> waitUntil(Clock& clock, Instant when);
Task<void> waitFor(Clock& clock, Nanoseconds duration);

/// The machine's clock. Callbacks run on the io_context's thread.
class RealClock final : public Clock {
 public:
  explicit RealClock(boost::asio::io_context& context);
  ~RealClock() override;
  Instant now() const override;
  Ticket at(Instant when, std::function<void()> callback) override;
  void cancel(Ticket ticket) override;

 private:
  struct State;
  std::shared_ptr<State> state_;
};

/// Time that moves only when nothing is left to do: an ordered queue keyed by (deadline, order of
/// asking). The same calls give the same order every run.
class VirtualClock final : public Clock {
 public:
  explicit VirtualClock(Instant start = kDefaultStart) : now_(start) {}
  ~VirtualClock() override;

  /// 2026-05-04T09:30:00Z, an invented Monday morning.
  static constexpr Instant kDefaultStart{std::chrono::seconds(1'777'887'000)};

  Instant now() const override { return now_; }
  Ticket at(Instant when, std::function<void()> callback) override;
  void cancel(Ticket ticket) override;

  /// Moves to the earliest deadline and runs its callback. False when nothing waits.
  bool advance();
  /// The earliest deadline, or Instant::max() when nothing waits.
  Instant next() const;

 private:
  /// One callback in the heap. A ticket is a slot and how often that slot was used before, so that a stale one is
  /// seen at a glance; what was cancelled leaves the heap when it comes to the top, or when most of it is stale.
  struct Waiting {
    Instant deadline;
    std::uint64_t order = 0;
    Ticket ticket = 0;
  };
  struct Slot {
    std::function<void()> callback;
    std::uint32_t uses = 0;
  };
  static bool later(const Waiting& a, const Waiting& b);
  Slot* slotOf(Ticket ticket);
  std::function<void()> release(Slot& slot, Ticket ticket);
  void dropStale();

  Instant now_;
  std::uint64_t asked_ = 0;
  std::vector<Waiting> heap_;
  std::vector<Slot> slots_;
  std::vector<std::uint32_t> free_;
};

/// Runs the context in virtual time until nothing is ready and nothing waits, or `done` says so.
void runVirtual(boost::asio::io_context& context, VirtualClock& clock,
                const std::function<bool()>& done = {});

}  // namespace shuntwright
