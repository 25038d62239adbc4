#pragma once

#include <cstdint>
#include <deque>
#include <functional>
#include <memory>
#include <vector>

#include "driver/core/clock.h"
#include "driver/core/task.h"

namespace shuntwright {

/// Wakes whoever waits. One thread; no state is kept between notifications: check the condition in a
/// loop around wait(), as with a condition variable.
class Event {
 public:
  Event();
  ~Event();
  Event(const Event&) = delete;
  Event& operator=(const Event&) = delete;

  Task<void> wait();
  /// False when the deadline comes first. Instant::max(): waits for ever.
  Task<bool> wait(Clock& clock, Instant deadline);
  void notifyAll();

 private:
  struct Waiter;
  using Waiters = std::vector<std::shared_ptr<Waiter>>;
  static Task<bool> waitOn(const std::shared_ptr<Waiters>& waiters, Clock* clock, Instant deadline);

  std::shared_ptr<Waiters> waiters_;
};

/// Gives a resource to one coroutine at a time, first come first served.
class AsyncMutex {
 public:
  class Lock {
   public:
    Lock() = default;
    explicit Lock(AsyncMutex& mutex) : mutex_(&mutex) {}
    Lock(Lock&& other) noexcept : mutex_(other.mutex_) { other.mutex_ = nullptr; }
    Lock& operator=(Lock&& other) noexcept;
    ~Lock() { release(); }
    void release();

   private:
    AsyncMutex* mutex_ = nullptr;
  };

  Task<Lock> lock();

 private:
  Event freed_;
  bool held_ = false;
  std::uint64_t nextTurn_ = 0;
  std::deque<std::uint64_t> turns_;
};

/// Starts all of them at once and ends when all have ended. Cancelling it cancels each of them. When one
/// throws, the others are cancelled, awaited, and the first exception is thrown on.
Task<void> whenAll(std::vector<std::function<Task<void>()>> bodies);

/// Runs `body` where no cancellation reaches it: for what must be finished, such as opening relays.
/// A coroutine that has been cancelled already must first
/// `co_await asio::this_coro::reset_cancellation_state(asio::disable_cancellation())`, since Asio throws
/// from the next co_await of a cancelled one.
Task<void> withoutCancellation(std::function<Task<void>()> body);

}  // namespace shuntwright
