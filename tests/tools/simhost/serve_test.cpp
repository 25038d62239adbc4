// Simulated devices on in-memory streams, in virtual time.
#include "tools/simhost/serve.h"

#include <gtest/gtest.h>

#include <array>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/io_context.hpp>

#include "tests/support/virtual_bench.h"

namespace shuntwright::simhost {
namespace {

using namespace std::chrono_literals;
using transport::Stream;

class MemoryHost : public ::testing::Test {
 protected:
  /// Opens a device and runs `body` with its stream, in virtual time.
  using Body = std::function<Task<void>(Stream&)>;
  Result<void> run(const std::string& device, Body body) {
    if (!bench_) bench_ = std::make_unique<sim::Bench>(rack_, scenario_, 1, clock_.now());
    opener_ = memoryOpener(*bench_, clock_);
    boost::asio::io_context context;
    Result<void> outcome;
    bool ended = false;
    const auto whole = [this, device, body, &outcome]() -> Task<void> {
      return open(device, body, &outcome);
    };
    boost::asio::co_spawn(context, whole, [&](std::exception_ptr thrown) {
      EXPECT_FALSE(thrown);
      ended = true;
    });
    runVirtual(context, clock_, [&] { return ended; });
    EXPECT_TRUE(ended);
    return outcome;
  }

  static Task<std::string> hear(Stream& stream, Clock& clock, Nanoseconds wait) {
    std::string heard;
    std::array<std::byte, 256> buffer;
    const Instant end = clock.now() + wait;
    for (;;) {
      auto got = co_await stream.read(buffer, end);
      if (!got) co_return got.error().code == ErrorCode::timeout ? heard : heard + "<closed>";
      heard += textOf(std::span(buffer.data(), *got));
    }
  }
  static Task<std::string> ask(Stream& stream, Clock& clock, std::string request, Nanoseconds wait = 50ms) {
    auto sent = co_await stream.write(bytesOf(request), Instant::max());
    if (!sent) co_return "<closed>";
    co_return co_await hear(stream, clock, wait);
  }

  const description::Rack rack_ = test::shippedRack("small_bench.toml");
  sim::Scenario scenario_;
  VirtualClock clock_;
  std::unique_ptr<sim::Bench> bench_;

 private:
  Task<void> open(std::string device, Body body, Result<void>* outcome) {
    auto stream = co_await opener_(*rack_.device(device));
    if (!stream) {
      *outcome = std::unexpected(std::move(stream.error()));
      co_return;
    }
    co_await body(**stream);
    (*stream)->close();
  }
  transport::Opener opener_;
};

TEST_F(MemoryHost, answersInVirtualTime) {
  const Instant begun = clock_.now();
  std::string heard;
  ASSERT_TRUE(
      run("relays1", [&](Stream& s) -> Task<void> { heard = co_await ask(s, clock_, "IDENT\r\n", 1h); }));
  EXPECT_EQ(heard, "IDENT\r\nRELAY32/SIM-relays1/1.0\r\n");
  EXPECT_EQ(clock_.now() - begun, 1h);
}

TEST_F(MemoryHost, relaysStayOverAReconnection) {
  std::string before, after;
  ASSERT_TRUE(
      run("relays1", [&](Stream& s) -> Task<void> { before = co_await ask(s, clock_, "CLOSE 05\r\n"); }));
  EXPECT_EQ(before, "CLOSE 05\r\nOK\r\n");
  ASSERT_TRUE(
      run("relays1", [&](Stream& s) -> Task<void> { after = co_await ask(s, clock_, "STATE 05\r\n"); }));
  EXPECT_EQ(after, "STATE 05\r\nSTATE 05 CLOSED\r\n");
}

TEST_F(MemoryHost, aNewClientHearsNoBacklog) {
  std::string first, second;
  ASSERT_TRUE(run("amp1", [&](Stream& s) -> Task<void> { first = co_await ask(s, clock_, "*GO\n", 100ms); }));
  EXPECT_TRUE(first.starts_with("#GO\r\n"));
  VirtualClock::Ticket unused = clock_.at(clock_.now() + 1h, [] {});
  (void)unused;
  while (clock_.advance()) {
  }
  ASSERT_TRUE(run("amp1", [&](Stream& s) -> Task<void> { second = co_await hear(s, clock_, 200ms); }));
  const auto lines = std::count(second.begin(), second.end(), '\n');
  EXPECT_GE(lines, 3) << "20 samples/s";
  EXPECT_LE(lines, 5);
}

TEST_F(MemoryHost, pullingThePlugEndsTheStreamAndLaterItCanBeOpenedAgain) {
  scenario_.devices["relays1"].unpluggedAfter = 2s;
  scenario_.devices["relays1"].unpluggedFor = 60s;
  std::string heard;
  Instant ended;
  ASSERT_TRUE(run("relays1", [&](Stream& s) -> Task<void> {
    heard = co_await ask(s, clock_, "CLOSE 05\r\n", 10s);
    ended = clock_.now();
  }));
  EXPECT_EQ(heard, "CLOSE 05\r\nOK\r\n<closed>");
  EXPECT_EQ(ended - VirtualClock::kDefaultStart, 2s);
  const auto away = run("relays1", [&](Stream&) -> Task<void> { co_return; });
  ASSERT_FALSE(away.has_value());
  EXPECT_EQ(away.error().code, ErrorCode::io);
  (void)clock_.at(clock_.now() + 61s, [] {});
  while (clock_.advance()) {
  }
  ASSERT_TRUE(
      run("relays1", [&](Stream& s) -> Task<void> { heard = co_await ask(s, clock_, "STATE 05\r\n"); }));
  EXPECT_EQ(heard, "STATE 05\r\nSTATE 05 CLOSED\r\n") << "its relays stayed as they were";
}

// What the driver makes of a plug pulled in mid-calibration: an error that names the device, and open relays.
TEST(Unplugged, theAmplifierLeavesDuringACalibration) {
  sim::Scenario scenario;
  scenario.devices["amp1"].unpluggedAfter = 3s;
  test::VirtualBench world(test::shippedRack("small_bench.toml"), scenario);
  const auto record = world.calibrate();
  ASSERT_FALSE(record.has_value());
  EXPECT_NE(record.error().text().find("amp1"), std::string::npos) << record.error().text();
  EXPECT_TRUE(world.bench->closedRelays().empty());
  EXPECT_TRUE(world.journal.unresolved().empty());
}

// A relay board out of reach cannot be opened: it is in the book.
TEST(Unplugged, theRelayBoardLeavesWithAClosedRelay) {
  sim::Scenario scenario;
  scenario.devices["relays1"].unpluggedAfter = 3s;
  test::VirtualBench world(test::shippedRack("small_bench.toml"), scenario);
  const auto record = world.calibrate();
  const auto closed = world.bench->closedRelays();
  const auto noted = world.journal.unresolved();
  for (const auto& relay : closed) EXPECT_TRUE(noted.contains(relay));
  if (record) {
    EXPECT_FALSE(record->passed());
    EXPECT_FALSE(record->relaysMaybeClosed.empty());
  } else {
    EXPECT_NE(record.error().text().find("relays1"), std::string::npos) << record.error().text();
  }
}

TEST(ScaledClock, runsAsManyTimesAsFast) {
  VirtualClock real;
  ScaledClock fast(real, 10), slow(real, 0.01);
  const Instant begun = real.now();
  Instant fired{};
  (void)fast.at(begun + 10s, [&] { fired = real.now(); });
  ASSERT_TRUE(real.advance());
  EXPECT_EQ(fired - begun, 1s);
  EXPECT_NEAR(seconds(fast.now() - begun), 10, 1e-6);
  EXPECT_NEAR(seconds(slow.now() - begun), 0.01, 1e-9);
  bool called = false;
  const auto ticket = slow.at(Instant::max(), [&] { called = true; });
  EXPECT_GT(real.next(), begun + 24h * 365);
  slow.cancel(ticket);
  EXPECT_FALSE(real.advance());
  EXPECT_FALSE(called);
}

}  // namespace
}  // namespace shuntwright::simhost
