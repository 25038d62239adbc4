#include "driver/core/clock.h"

#include <gtest/gtest.h>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/system/system_error.hpp>
#include <memory>
#include <vector>

namespace shuntwright {
namespace {

namespace asio = boost::asio;
using namespace std::chrono_literals;

TEST(Instant, PrintsAsRfc3339) {
  EXPECT_EQ(rfc3339(VirtualClock::kDefaultStart), "2026-05-04T09:30:00.000Z");
  EXPECT_EQ(rfc3339(VirtualClock::kDefaultStart + 86'399'999'999'999ns), "2026-05-05T09:29:59.999Z");
  EXPECT_EQ(rfc3339(Instant{}), "1970-01-01T00:00:00.000Z");
  EXPECT_EQ(rfc3339(Instant(951'782'400s)), "2000-02-29T00:00:00.000Z");
}

TEST(VirtualClock, RunsCallbacksInTheOrderOfDeadlineAndThenOfAsking) {
  VirtualClock clock;
  std::vector<int> order;
  const Instant start = clock.now();
  clock.at(start + 2s, [&] { order.push_back(3); });
  clock.at(start + 1s, [&] { order.push_back(1); });
  clock.at(start + 1s, [&] { order.push_back(2); });
  clock.at(start - 1s, [&] { order.push_back(0); });
  EXPECT_EQ(clock.next(), start) << "what is due already runs now, and time does not go back";
  while (clock.advance()) {
  }
  EXPECT_EQ(order, (std::vector<int>{0, 1, 2, 3}));
  EXPECT_EQ(clock.now(), start + 2s);
  EXPECT_EQ(clock.next(), Instant::max());
}

TEST(VirtualClock, CancelledCallbacksDoNotRun) {
  VirtualClock clock;
  int ran = 0;
  const auto first = clock.at(clock.now() + 1s, [&] { ++ran; });
  const auto second = clock.at(clock.now() + 2s, [&] { ++ran; });
  clock.cancel(first);
  clock.cancel(first);
  clock.cancel(12345);
  while (clock.advance()) {
  }
  EXPECT_EQ(ran, 1);
  clock.cancel(second);
}

TEST(VirtualClock, ACallbackMayAskAndCancel) {
  VirtualClock clock;
  int ran = 0;
  Clock::Ticket other = 0;
  clock.at(clock.now() + 1s, [&] {
    clock.cancel(other);
    clock.at(clock.now(), [&] { ++ran; });
  });
  other = clock.at(clock.now() + 2s, [&] { ran += 100; });
  while (clock.advance()) {
  }
  EXPECT_EQ(ran, 1);
}

// ---- both clocks, one list of promises

template <class World>
class ClockContract : public ::testing::Test {
 protected:
  World world;

  void spawn(std::function<Task<void>()> body) {
    asio::co_spawn(world.context, body, [this](std::exception_ptr e) {
      ++ended;
      if (e) ++thrown;
    });
  }
  int ended = 0;
  int thrown = 0;
};

struct VirtualWorld {
  asio::io_context context;
  VirtualClock clock;
  void run() { runVirtual(context, clock); }
};
struct RealWorld {
  asio::io_context context;
  RealClock clock{context};
  void run() { context.run(); }
};

using Worlds = ::testing::Types<VirtualWorld, RealWorld>;
TYPED_TEST_SUITE(ClockContract, Worlds);

TYPED_TEST(ClockContract, AWaitEndsAtItsTimeAndNotBefore) {
  auto& clock = this->world.clock;
  const Instant start = clock.now();
  Instant woken{};
  this->spawn([&]() -> Task<void> {
    co_await waitUntil(clock, start + 3ms);
    woken = clock.now();
  });
  this->world.run();
  EXPECT_EQ(this->ended, 1);
  EXPECT_GE(woken, start + 3ms);
}

TYPED_TEST(ClockContract, WaitsEndInTheOrderOfTheirTimes) {
  auto& clock = this->world.clock;
  std::vector<int> order;
  for (const int k : {3, 1, 2}) {
    this->spawn([&order, &clock, k]() -> Task<void> {
      co_await waitFor(clock, k * 2ms);
      order.push_back(k);
    });
  }
  this->world.run();
  EXPECT_EQ(order, (std::vector<int>{1, 2, 3}));
}

TYPED_TEST(ClockContract, CancellationEndsAWaitAtOnce) {
  auto& clock = this->world.clock;
  const Instant start = clock.now();
  asio::cancellation_signal signal;
  bool cancelled = false;
  asio::co_spawn(
      this->world.context, [&]() -> Task<void> { co_await waitFor(clock, 1h); },
      asio::bind_cancellation_slot(signal.slot(), [&](std::exception_ptr e) {
        try {
          if (e) std::rethrow_exception(e);
        } catch (const boost::system::system_error& error) {
          cancelled = error.code() == asio::error::operation_aborted;
        }
      }));
  clock.at(start + 1ms, [&] { signal.emit(asio::cancellation_type::terminal); });
  this->world.run();
  EXPECT_TRUE(cancelled);
  EXPECT_LT(clock.now(), start + 1min);
}

TYPED_TEST(ClockContract, MayBeTornDownWithWaitsPending) {
  auto kept = std::make_shared<int>(1);
  const std::weak_ptr<int> watch = kept;
  {
    TypeParam doomed;
    auto body = [&clock = doomed.clock, kept]() -> Task<void> {
      auto mine = kept;
      co_await waitFor(clock, 1h);
    };
    asio::co_spawn(doomed.context, body, asio::detached);
    doomed.context.poll();
  }
  kept.reset();
  EXPECT_TRUE(watch.expired()) << "the waiting coroutine was destroyed";
}

TEST(RealClock, StartsAtTheTimeOfDayAndGoesOn) {
  asio::io_context context;
  RealClock clock(context);
  const auto off = clock.now() - std::chrono::system_clock::now();
  EXPECT_LT(std::chrono::abs(off), 1s);
  const Instant before = clock.now();
  EXPECT_GE(clock.now(), before);
}

TEST(RunVirtual, StopsWhenToldTo) {
  asio::io_context context;
  VirtualClock clock;
  int ticks = 0;
  asio::co_spawn(
      context,
      [&]() -> Task<void> {
        for (;;) {
          co_await waitFor(clock, 1s);
          ++ticks;
        }
      },
      asio::detached);
  runVirtual(context, clock, [&] { return ticks == 1000; });
  EXPECT_EQ(ticks, 1000);
  EXPECT_EQ(clock.now(), VirtualClock::kDefaultStart + 1000s);
}

}  // namespace
}  // namespace shuntwright
