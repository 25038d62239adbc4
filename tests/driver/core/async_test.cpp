#include "driver/core/async.h"

#include <gtest/gtest.h>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/this_coro.hpp>
#include <boost/system/system_error.hpp>
#include <stdexcept>
#include <string>

namespace shuntwright {
namespace {

namespace asio = boost::asio;
using namespace std::chrono_literals;

/// Coroutines in virtual time, each of which can be cancelled at a given time.
class AsyncTest : public ::testing::Test {
 protected:
  struct Spawned {
    asio::cancellation_signal signal;
    bool ended = false;
    std::string end;  ///< "", "cancelled" or what was thrown
  };

  asio::io_context context;
  VirtualClock clock;

  std::shared_ptr<Spawned> spawn(std::function<Task<void>()> body) {
    auto spawned = std::make_shared<Spawned>();
    asio::co_spawn(
        context, body, asio::bind_cancellation_slot(spawned->signal.slot(), [spawned](std::exception_ptr e) {
          spawned->ended = true;
          try {
            if (e) std::rethrow_exception(e);
          } catch (const boost::system::system_error& error) {
            spawned->end = error.code() == asio::error::operation_aborted ? "cancelled" : error.what();
          } catch (const std::exception& error) {
            spawned->end = error.what();
          }
        }));
    return spawned;
  }
  void cancelAt(Nanoseconds when, std::shared_ptr<Spawned> what) {
    clock.at(VirtualClock::kDefaultStart + when,
             [what] { what->signal.emit(asio::cancellation_type::terminal); });
  }
  void run() { runVirtual(context, clock); }
  Nanoseconds now() const { return clock.now() - VirtualClock::kDefaultStart; }

  std::string log;
};

using EventTest = AsyncTest;

TEST_F(EventTest, WakesEverybodyWhoWaits) {
  Event event;
  for (int k = 0; k < 3; ++k) {
    spawn([&]() -> Task<void> {
      co_await event.wait();
      log += "w";
    });
  }
  clock.at(clock.now() + 1s, [&] {
    log += "n";
    event.notifyAll();
  });
  run();
  EXPECT_EQ(log, "nwww");
}

TEST_F(EventTest, KeepsNothingForThoseWhoComeLater) {
  Event event;
  event.notifyAll();
  const auto waiting = spawn([&]() -> Task<void> { co_await event.wait(); });
  run();
  EXPECT_FALSE(waiting->ended);
  event.notifyAll();
  run();
  EXPECT_TRUE(waiting->ended);
}

TEST_F(EventTest, AWaitWithDeadlineSaysWhichCameFirst) {
  Event event;
  bool first = false, second = true;
  Nanoseconds heard{}, gaveUp{};
  spawn([&]() -> Task<void> {
    first = co_await event.wait(clock, clock.now() + 10s);
    heard = now();
    second = co_await event.wait(clock, clock.now() + 10s);
    gaveUp = now();
  });
  clock.at(clock.now() + 1s, [&] { event.notifyAll(); });
  run();
  EXPECT_TRUE(first);
  EXPECT_EQ(heard, 1s);
  EXPECT_FALSE(second);
  EXPECT_EQ(gaveUp, 11s);
  EXPECT_EQ(clock.next(), Instant::max());
}

TEST_F(EventTest, CancellationEndsAWaitAndLeavesTheOthers) {
  Event event;
  const auto one = spawn([&]() -> Task<void> { co_await event.wait(); });
  const auto two = spawn([&]() -> Task<void> { co_await event.wait(clock, clock.now() + 1h); });
  cancelAt(1s, one);
  cancelAt(2s, two);
  const auto three = spawn([&]() -> Task<void> { co_await event.wait(); });
  run();
  EXPECT_EQ(one->end, "cancelled");
  EXPECT_EQ(two->end, "cancelled");
  EXPECT_FALSE(three->ended);
  EXPECT_EQ(now(), 2s);
  event.notifyAll();
  run();
  EXPECT_EQ(three->end, "");
}

using AsyncMutexTest = AsyncTest;

TEST_F(AsyncMutexTest, IsHeldByOneAtATimeInTheOrderOfAsking) {
  AsyncMutex mutex;
  int holders = 0;
  for (int k = 0; k < 4; ++k) {
    spawn([&, k]() -> Task<void> {
      auto lock = co_await mutex.lock();
      EXPECT_EQ(++holders, 1);
      co_await waitFor(clock, 1s);
      log += std::to_string(k);
      --holders;
    });
  }
  run();
  EXPECT_EQ(log, "0123");
  EXPECT_EQ(now(), 4s);
}

TEST_F(AsyncMutexTest, NobodyOvertakesWhoWasWokenButHasNotRunYet) {
  AsyncMutex mutex;
  spawn([&]() -> Task<void> {
    for (int k = 0; k < 3; ++k) {
      auto lock = co_await mutex.lock();
      log += "a";
      co_await waitFor(clock, 1s);
      lock.release();  // and asks again at once
    }
  });
  spawn([&]() -> Task<void> {
    for (int k = 0; k < 3; ++k) {
      auto lock = co_await mutex.lock();
      log += "b";
      co_await waitFor(clock, 1s);
    }
  });
  run();
  EXPECT_EQ(log, "ababab");
}

TEST_F(AsyncMutexTest, WhoIsCancelledInTheQueueLeavesIt) {
  AsyncMutex mutex;
  const auto hold = [&](const char* name) {
    return spawn([this, &mutex, name]() -> Task<void> {
      auto lock = co_await mutex.lock();
      co_await waitFor(clock, 10s);
      log += name;
    });
  };
  hold("a");
  const auto first = hold("b");
  const auto second = hold("c");
  hold("d");
  cancelAt(1s, second);
  cancelAt(2s, first);
  run();
  EXPECT_EQ(first->end, "cancelled");
  EXPECT_EQ(second->end, "cancelled");
  EXPECT_EQ(log, "ad");
  EXPECT_EQ(now(), 20s);
}

TEST_F(AsyncMutexTest, WhoIsCancelledWhileHoldingItGivesItBack) {
  AsyncMutex mutex;
  const auto holder = spawn([&]() -> Task<void> {
    auto lock = co_await mutex.lock();
    co_await waitFor(clock, 1h);
  });
  spawn([&]() -> Task<void> {
    auto lock = co_await mutex.lock();
    log += "got it";
  });
  cancelAt(1s, holder);
  run();
  EXPECT_EQ(log, "got it");
  EXPECT_EQ(now(), 1s);
}

TEST_F(AsyncMutexTest, AnAskerCancelledAtTheMomentOfReleaseLosesNothing) {
  AsyncMutex mutex;
  const auto holder = [&](const char* name, Nanoseconds time) {
    return spawn([this, &mutex, name, time]() -> Task<void> {
      auto lock = co_await mutex.lock();
      co_await waitFor(clock, time);
      log += name;
    });
  };
  holder("a", 1s);
  const auto second = holder("b", 1s);
  holder("c", 1s);
  cancelAt(1s, second);  // in the same instant in which "a" gives it back
  run();
  EXPECT_TRUE(log == "ac" || log == "abc") << log;
  EXPECT_TRUE(second->ended);
}

using WhenAllTest = AsyncTest;

TEST_F(WhenAllTest, RunsThemSideBySideAndEndsWithTheLast) {
  const auto all = spawn([&]() -> Task<void> {
    std::vector<std::function<Task<void>()>> bodies;
    for (int k = 1; k <= 3; ++k) {
      bodies.push_back([this, k]() -> Task<void> {
        co_await waitFor(clock, k * 1s);
        log += std::to_string(k);
      });
    }
    co_await whenAll(std::move(bodies));
    log += "end";
  });
  run();
  EXPECT_TRUE(all->ended);
  EXPECT_EQ(log, "123end");
  EXPECT_EQ(now(), 3s);
}

TEST_F(WhenAllTest, OfNothingEndsAtOnce) {
  const auto all = spawn([]() -> Task<void> {
    std::vector<std::function<Task<void>()>> none;
    co_await whenAll(std::move(none));
  });
  run();
  EXPECT_TRUE(all->ended);
  EXPECT_EQ(all->end, "");
}

TEST_F(WhenAllTest, AnExceptionCancelsTheOthersAndIsThrownOnAfterThem) {
  const auto all = spawn([&]() -> Task<void> {
    std::vector<std::function<Task<void>()>> bodies;
    bodies.push_back([this]() -> Task<void> {
      co_await waitFor(clock, 1s);
      throw std::runtime_error("broken");
    });
    bodies.push_back([this]() -> Task<void> {
      std::exception_ptr stopped;
      try {
        co_await waitFor(clock, 1h);
      } catch (...) {
        stopped = std::current_exception();
      }
      co_await asio::this_coro::reset_cancellation_state(asio::disable_cancellation());
      co_await waitFor(clock, 5s);
      log += "tidied";
      if (stopped) std::rethrow_exception(stopped);
    });
    co_await whenAll(std::move(bodies));
  });
  run();
  EXPECT_EQ(all->end, "broken");
  EXPECT_EQ(log, "tidied");
  EXPECT_EQ(now(), 6s);
}

TEST_F(WhenAllTest, CancellingItCancelsEachAndAwaitsThem) {
  const auto all = spawn([&]() -> Task<void> {
    std::vector<std::function<Task<void>()>> bodies;
    for (int k = 1; k <= 3; ++k) {
      bodies.push_back([this, k]() -> Task<void> {
        std::exception_ptr stopped;
        try {
          co_await waitFor(clock, 1h);
        } catch (...) {
          stopped = std::current_exception();
        }
        co_await asio::this_coro::reset_cancellation_state(asio::disable_cancellation());
        co_await waitFor(clock, k * 1s);
        log += std::to_string(k);
        if (stopped) std::rethrow_exception(stopped);
      });
    }
    co_await whenAll(std::move(bodies));
    log += "never";
  });
  cancelAt(10s, all);
  run();
  EXPECT_EQ(all->end, "cancelled");
  EXPECT_EQ(log, "123");
  EXPECT_EQ(now(), 13s);
}

TEST_F(WhenAllTest, MayStandInsideAnother) {
  const auto all = spawn([&]() -> Task<void> {
    std::vector<std::function<Task<void>()>> outer;
    for (int k = 0; k < 2; ++k) {
      outer.push_back([this]() -> Task<void> {
        std::vector<std::function<Task<void>()>> inner;
        for (int j = 0; j < 2; ++j) {
          inner.push_back([this]() -> Task<void> {
            co_await waitFor(clock, 1h);
            log += "never";
          });
        }
        co_await whenAll(std::move(inner));
      });
    }
    co_await whenAll(std::move(outer));
  });
  cancelAt(1s, all);
  run();
  EXPECT_EQ(all->end, "cancelled");
  EXPECT_EQ(log, "");
}

using WithoutCancellationTest = AsyncTest;

TEST_F(WithoutCancellationTest, FinishesItsBodyAndThenThrowsTheCancellationOn) {
  const auto task = spawn([&]() -> Task<void> {
    co_await withoutCancellation([this]() -> Task<void> {
      co_await waitFor(clock, 10s);
      log += "done";
    });
    log += "never";
  });
  cancelAt(1s, task);
  run();
  EXPECT_EQ(log, "done");
  EXPECT_EQ(task->end, "cancelled");
  EXPECT_EQ(now(), 10s);
}

TEST_F(WithoutCancellationTest, PassesOnWhatItsBodyThrows) {
  const auto task = spawn([&]() -> Task<void> {
    co_await withoutCancellation([this]() -> Task<void> {
      co_await waitFor(clock, 1s);
      throw std::runtime_error("broken");
    });
  });
  run();
  EXPECT_EQ(task->end, "broken");
}

TEST_F(WithoutCancellationTest, RunsInACoroutineThatWasCancelledAndResetItsState) {
  const auto task = spawn([&]() -> Task<void> {
    std::exception_ptr stopped;
    try {
      co_await waitFor(clock, 1h);
    } catch (...) {
      stopped = std::current_exception();
    }
    co_await asio::this_coro::reset_cancellation_state(asio::disable_cancellation());
    co_await withoutCancellation([this]() -> Task<void> {
      co_await waitFor(clock, 2s);
      log += "opened";
    });
    if (stopped) std::rethrow_exception(stopped);
  });
  cancelAt(1s, task);
  run();
  EXPECT_EQ(log, "opened");
  EXPECT_EQ(task->end, "cancelled");
  EXPECT_EQ(now(), 3s);
}

TEST_F(WithoutCancellationTest, EndsNormallyWhenNobodyCancels) {
  const auto task = spawn([&]() -> Task<void> {
    co_await withoutCancellation([this]() -> Task<void> { co_await waitFor(clock, 1s); });
    log += "on";
  });
  run();
  EXPECT_EQ(log, "on");
  EXPECT_TRUE(task->ended);
}

}  // namespace
}  // namespace shuntwright
