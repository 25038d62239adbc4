// proves P-07, P-08
#include "driver/rack/relay_guard.h"

#include <gtest/gtest.h>

#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/system/system_error.hpp>

#include "tests/support/fake_device.h"

namespace shuntwright::rack {
namespace {

namespace asio = boost::asio;
using description::RelayRef;

class RelayGuardTest : public ::testing::Test {
 protected:
  LoadPathPermit permit() {
    description::Rack rack;
    return *confirmLoadPath(rack, true, "test");
  }

  /// Runs a body inside withRelays to its end; a cancellation comes after `cancelAfter` clock steps if >= 0.
  Result<void> run(std::function<Task<Result<void>>()> body, int cancelAfter = -1) {
    Result<void> result = fail(ErrorCode::cancelled, "did not end");
    thrown_ = nullptr;
    asio::cancellation_signal signal;
    auto whole = [](RelayGuard* guard, std::function<Task<Result<void>>()> inner, Result<void>* out) -> Task<void> {
      *out = co_await withRelays(*guard, std::move(inner));
    };
    RelayGuard* guard = &guard_;
    Result<void>* out = &result;
    asio::co_spawn(
        context_, [whole, guard, body, out]() -> Task<void> { return whole(guard, body, out); },
        asio::bind_cancellation_slot(signal.slot(), [this](std::exception_ptr e) { thrown_ = e; }));
    int steps = 0;
    for (;;) {
      context_.restart();
      while (context_.poll() > 0) {
      }
      if (steps++ == cancelAfter) {
        signal.emit(asio::cancellation_type::terminal);
        continue;
      }
      if (!clock_.advance()) break;
    }
    return result;
  }

  asio::io_context context_;
  VirtualClock clock_;
  MemoryJournal journal_;
  test::FakeRelayBoard board_{"relays1"};
  RelayGuard guard_{{{"relays1", &board_}}, journal_, clock_};
  std::exception_ptr thrown_;
};

Task<Result<void>> closeTwoAndWait(RelayGuard* guard, LoadPathPermit permit, Clock* clock) {
  // Named first: g++ 12 destroys an aggregate temporary in a co_await expression twice.
  const RelayRef two{"relays1", 2}, five{"relays1", 5};
  if (auto closed = co_await guard->close(permit, two); !closed) co_return closed;
  co_await waitFor(*clock, std::chrono::seconds(1));
  if (auto closed = co_await guard->close(permit, five); !closed) co_return closed;
  co_await waitFor(*clock, std::chrono::seconds(1));
  co_return Result<void>{};
}

Task<Result<void>> waitASecond(Clock* clock) {
  co_await waitFor(*clock, std::chrono::seconds(1));
  co_return Result<void>{};
}

TEST_F(RelayGuardTest, relaysAreOpenAfterANormalEnd) {
  auto done = run([this] { return closeTwoAndWait(&guard_, permit(), &clock_); });
  EXPECT_TRUE(done.has_value());
  EXPECT_TRUE(board_.closed.empty());
  EXPECT_TRUE(guard_.maybeClosed().empty());
  EXPECT_TRUE(journal_.unresolved().empty());
}

TEST_F(RelayGuardTest, knowsWhenARelayWasLastClosedThoughNobodyLookedMeanwhile) {
  EXPECT_FALSE(guard_.lastClosed().has_value());
  run([this] { return closeTwoAndWait(&guard_, permit(), &clock_); });
  const Instant opened = clock_.now();
  EXPECT_EQ(guard_.lastClosed(), opened);
  run([this]() -> Task<Result<void>> { return waitASecond(&clock_); });
  EXPECT_EQ(guard_.lastClosed(), opened);
}

TEST_F(RelayGuardTest, relaysAreOpenAfterAnError) {
  board_.fails = [](const std::string& operation) -> Result<void> {
    if (operation == "close 5") return fail(ErrorCode::timeout, "no answer");
    return {};
  };
  auto done = run([this] { return closeTwoAndWait(&guard_, permit(), &clock_); });
  ASSERT_FALSE(done.has_value());
  EXPECT_EQ(done.error().code, ErrorCode::timeout);
  EXPECT_TRUE(board_.closed.empty());
}

Task<Result<void>> closeAndThrow(RelayGuard* guard, LoadPathPermit permit) {
  const RelayRef two{"relays1", 2};
  auto closed = co_await guard->close(permit, two);
  if (closed) throw std::runtime_error("a fault of our own");
  co_return closed;
}

TEST_F(RelayGuardTest, relaysAreOpenAfterAnException) {
  run([this] { return closeAndThrow(&guard_, permit()); });
  EXPECT_TRUE(thrown_ != nullptr);
  EXPECT_TRUE(board_.closed.empty());
}

TEST_F(RelayGuardTest, relaysAreOpenAfterCancellationAtAnyWait) {
  int cancelled = 0;
  for (int at = 0; at < 8; ++at) {
    run([this] { return closeTwoAndWait(&guard_, permit(), &clock_); }, at);
    EXPECT_TRUE(board_.closed.empty()) << "cancelled after " << at << " steps";
    EXPECT_TRUE(guard_.maybeClosed().empty());
    if (thrown_) ++cancelled;
  }
  EXPECT_GE(cancelled, 4);
}

TEST_F(RelayGuardTest, nothingIsSentWhenTheJournalCannotBeWritten) {
  class FullDisk final : public RelayJournal {
    Result<void> closing(const RelayRef&, Instant) override { return fail(ErrorCode::io, "disk full"); }
    Result<void> opened(const RelayRef&, Instant) override { return {}; }
    std::set<RelayRef> unresolved() const override { return {}; }
  } full;
  RelayGuard guard({{"relays1", &board_}}, full, clock_);
  auto done = run([this, &guard] { return closeTwoAndWait(&guard, permit(), &clock_); });
  ASSERT_FALSE(done.has_value());
  EXPECT_EQ(done.error().message, "disk full");
  EXPECT_TRUE(board_.log.empty());
}

TEST_F(RelayGuardTest, aWeldedRelayIsNamedAndStaysInTheBook) {
  board_.welded = {2};
  auto done = run([this] { return closeTwoAndWait(&guard_, permit(), &clock_); });
  ASSERT_FALSE(done.has_value());
  EXPECT_NE(done.error().message.find("relays1/2"), std::string::npos) << done.error().text();
  EXPECT_EQ(done.error().message.find("relays1/5"), std::string::npos);
  EXPECT_EQ(guard_.maybeClosed(), (std::set<RelayRef>{{"relays1", 2}}));
  EXPECT_EQ(journal_.unresolved(), guard_.maybeClosed());
}

TEST_F(RelayGuardTest, aCancellationStaysOneThoughARelayDoesNotOpen) {
  board_.welded.insert(2);
  const auto done = run([this] { return closeTwoAndWait(&guard_, permit(), &clock_); }, 2);
  ASSERT_TRUE(thrown_) << "a calibration cut short must not look like one that ended";
  EXPECT_FALSE(done.has_value());
  EXPECT_TRUE(guard_.maybeClosed().contains({"relays1", 2}));
}

TEST_F(RelayGuardTest, aRelayThatDoesNotCloseIsAnErrorWithReadBack) {
  board_.dead = {2};
  auto done = run([this] { return closeTwoAndWait(&guard_, permit(), &clock_); });
  ASSERT_FALSE(done.has_value());
  EXPECT_EQ(done.error().code, ErrorCode::device_error);
  EXPECT_NE(done.error().message.find("reads back open"), std::string::npos);
}

TEST_F(RelayGuardTest, openingIsTriedAgainUntilTheDeviceAnswers) {
  int failures = 3;
  board_.fails = [&failures](const std::string& operation) -> Result<void> {
    if (operation == "open all" && failures-- > 0) return fail(ErrorCode::timeout, "no answer");
    return {};
  };
  auto done = run([this] { return closeTwoAndWait(&guard_, permit(), &clock_); });
  EXPECT_TRUE(done.has_value());
  EXPECT_TRUE(board_.closed.empty());
}

TEST_F(RelayGuardTest, relaysOfAnEarlierRunAreOpenedToo) {
  ASSERT_TRUE(journal_.closing(RelayRef{"relays1", 7}, clock_.now()));
  board_.closed = {7};
  RelayGuard guard({{"relays1", &board_}}, journal_, clock_);
  EXPECT_EQ(guard.maybeClosed().size(), 1u);
  Result<void> out;
  auto body = [](RelayGuard* g, Result<void>* result) -> Task<void> { *result = co_await g->openAll(); };
  RelayGuard* g = &guard;
  Result<void>* result = &out;
  asio::co_spawn(context_, [body, g, result]() -> Task<void> { return body(g, result); }, [](std::exception_ptr) {});
  runVirtual(context_, clock_);
  EXPECT_TRUE(out.has_value());
  EXPECT_TRUE(board_.closed.empty());
  EXPECT_TRUE(journal_.unresolved().empty());
}

Task<Result<void>> closeTheFirstOfEach(RelayGuard* guard, LoadPathPermit permit) {
  const RelayRef one{"relays1", 1}, other{"relays2", 1};
  if (auto closed = co_await guard->close(permit, one); !closed) co_return closed;
  co_return co_await guard->close(permit, other);
}

TEST_F(RelayGuardTest, aSilentBoardDoesNotKeepAnotherBoardsRelaysClosed) {
  test::FakeRelayBoard other("relays2");
  board_.clock = &clock_;
  board_.openingTakes = std::chrono::seconds(60);
  board_.fails = [](const std::string& operation) -> Result<void> {
    if (operation == "open all") return fail(ErrorCode::timeout, "no answer");
    return {};
  };
  RelayGuard guard({{"relays1", &board_}, {"relays2", &other}}, journal_, clock_);
  std::map<RelayRef, Instant> opened;
  guard.onSwitching = [&](const RelayRef& relay, bool closed) {
    if (!closed) opened[relay] = clock_.now();
  };
  Result<void> result;
  auto body = [](RelayGuard* g, LoadPathPermit p, Result<void>* out) -> Task<void> {
    std::function<Task<Result<void>>()> inner = [g, p]() -> Task<Result<void>> { return closeTheFirstOfEach(g, p); };
    *out = co_await withRelays(*g, std::move(inner));
  };
  asio::co_spawn(
      context_, [&]() -> Task<void> { return body(&guard, permit(), &result); }, [](std::exception_ptr) {});
  runVirtual(context_, clock_);
  ASSERT_FALSE(result.has_value());
  EXPECT_NE(result.error().text().find("no answer"), std::string::npos) << result.error().text();
  EXPECT_EQ(guard.maybeClosed(), (std::set<RelayRef>{{"relays1", 1}}));
  ASSERT_TRUE(opened.contains(RelayRef{"relays2", 1}));
  EXPECT_LT(opened[(RelayRef{"relays2", 1})] - VirtualClock::kDefaultStart, std::chrono::seconds(1));
}

TEST_F(RelayGuardTest, aBoardThatRefusesTheOrderForAllIsOpenedRelayByRelay) {
  board_.fails = [](const std::string& operation) -> Result<void> {
    if (operation == "open all") return fail(ErrorCode::device_error, "unknown command");
    return {};
  };
  auto done = run([this] { return closeTwoAndWait(&guard_, permit(), &clock_); });
  EXPECT_TRUE(done.has_value()) << done.error().text();
  EXPECT_TRUE(board_.closed.empty());
  EXPECT_TRUE(journal_.unresolved().empty());
}

TEST_F(RelayGuardTest, aJournalledRelayOfADeviceThatHasNoneAnyMoreIsNamedWithARemedy) {
  ASSERT_TRUE(journal_.closing(RelayRef{"amp1", 7}, clock_.now()));
  class Amplifier final : public test::FakeRelayBoard {
   public:
    Amplifier() : FakeRelayBoard("amp1") { described_.profile = std::make_shared<description::Profile>(); }
  } amplifier;
  RelayGuard guard({{"amp1", &amplifier}, {"relays1", &board_}}, journal_, clock_);
  Result<void> out;
  auto body = [](RelayGuard* g, Result<void>* result) -> Task<void> { *result = co_await g->openAll(); };
  asio::co_spawn(context_, [&]() -> Task<void> { return body(&guard, &out); }, [](std::exception_ptr) {});
  runVirtual(context_, clock_);
  ASSERT_FALSE(out.has_value());
  EXPECT_NE(out.error().text().find("amp1/7"), std::string::npos) << out.error().text();
  EXPECT_NE(out.error().text().find("delete the rack's relay journal"), std::string::npos) << out.error().text();
}

TEST(LoadPath, isRefusedWithoutConfirmationAndNamesTheLoadControlChannels) {
  description::Rack rack;
  rack.file = "rack.toml";
  rack.channels.resize(2);
  rack.channels[0].name = "S01";
  rack.channels[1].name = "LC1";
  rack.channels[1].loadControl = true;
  auto refused = confirmLoadPath(rack, false, "test");
  ASSERT_FALSE(refused.has_value());
  EXPECT_EQ(refused.error().code, ErrorCode::refused);
  EXPECT_NE(refused.error().message.find("LC1"), std::string::npos);
  EXPECT_EQ(refused.error().message.find("S01"), std::string::npos);
  EXPECT_TRUE(confirmLoadPath(rack, true, "--isolated").has_value());
}

}  // namespace
}  // namespace shuntwright::rack
