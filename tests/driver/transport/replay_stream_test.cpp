#include "driver/transport/replay_stream.h"

#include <gtest/gtest.h>
#include <unistd.h>
#include <array>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/io_context.hpp>
#include <filesystem>
#include <functional>

#include "driver/transport/memory_stream.h"
#include "driver/transport/tracing_stream.h"

namespace shuntwright::transport {
namespace {

namespace asio = boost::asio;
using namespace std::chrono_literals;

class Replay : public ::testing::Test {
 protected:
  asio::io_context context;
  VirtualClock clock;
  std::array<std::byte, 256> into;

  void run(std::function<Task<void>()> body) {
    bool ended = false;
    std::exception_ptr thrown;
    asio::co_spawn(context, body, [&](std::exception_ptr e) {
      ended = true;
      thrown = e;
    });
    runVirtual(context, clock, [&] { return ended; });
    ASSERT_TRUE(ended) << "it waits for something that never comes";
    if (thrown) std::rethrow_exception(thrown);
  }
  Nanoseconds now() const { return clock.now() - VirtualClock::kDefaultStart; }

  std::unique_ptr<Stream> play(const std::string& body, const std::string& name = "amp1") {
    const auto trace = parseTrace("shuntwright trace 1\nstart 0\n" + body, "t.trace");
    EXPECT_TRUE(trace) << trace.error().text();
    opener = replayOpener(*trace, "t.trace", clock);
    return open(name);
  }
  std::unique_ptr<Stream> open(const std::string& name) {
    std::unique_ptr<Stream> out;
    run([&]() -> Task<void> {
      description::Device device;
      device.name = name;
      auto opened = co_await opener(device);
      EXPECT_TRUE(opened) << opened.error().text();
      if (opened) out = std::move(*opened);
    });
    return out;
  }
  Result<std::string> read(Stream& from, Nanoseconds limit = 1h) {
    Result<std::string> out;
    run([&]() -> Task<void> {
      auto count = co_await from.read(into, clock.now() + limit);
      if (count) {
        out = std::string(textOf(ByteView(into).first(*count)));
      } else {
        out = std::unexpected(std::move(count.error()));
      }
    });
    return out;
  }
  Result<void> write(Stream& to, std::string text) {
    Result<void> out;
    run([&]() -> Task<void> { out = co_await to.write(bytesOf(text), Instant::max()); });
    return out;
  }
  void pass(Nanoseconds time) {
    run([&]() -> Task<void> { co_await waitFor(clock, time); });
  }

  Opener opener;
};

constexpr const char* kAsked = R"(+0.000000000 amp1 open
+1.000000000 amp1 > "ID?\n"
+1.002000000 amp1 < "ID"
+1.003000000 amp1 < " X\n"
+2.000000000 amp1 > "GO\n"
+2.010000000 amp1 < "1\n"
)";

TEST_F(Replay, AnAnswerComesAsLongAfterItsRequestAsItDidThen) {
  auto stream = play(kAsked);
  pass(5s);  // the driver asks later than then
  ASSERT_TRUE(write(*stream, "ID?\n"));
  EXPECT_EQ(read(*stream), "ID");
  EXPECT_EQ(now(), 5s + 2ms);
  EXPECT_EQ(read(*stream), " X\n");
  EXPECT_EQ(now(), 5s + 3ms);
}

TEST_F(Replay, NothingComesBeforeWhatWasWrittenBeforeItIsWritten) {
  auto stream = play(kAsked);
  EXPECT_EQ(read(*stream, 10s).error().code, ErrorCode::timeout);
  EXPECT_EQ(now(), 10s);
  ASSERT_TRUE(write(*stream, "ID?\n"));
  EXPECT_TRUE(read(*stream));
}

TEST_F(Replay, ARequestMadeEarlierThanThenKeepsTheOrderOfWhatIsRead) {
  auto stream = play(kAsked);
  ASSERT_TRUE(write(*stream, "ID?\n"));
  ASSERT_TRUE(write(*stream, "GO\n"));
  EXPECT_EQ(read(*stream), "ID");
  EXPECT_EQ(read(*stream), " X\n");
  EXPECT_EQ(now(), 3ms);
  EXPECT_EQ(read(*stream), "1\n");
  EXPECT_EQ(now(), 10ms);
}

TEST_F(Replay, AnotherWriteThanTheTracedOneNamesBothAndTheLine) {
  auto stream = play(kAsked);
  const auto wrong = write(*stream, "WHO?\n");
  ASSERT_FALSE(wrong);
  EXPECT_EQ(wrong.error().where, "t.trace:4, device amp1");
  EXPECT_EQ(wrong.error().message, "the driver writes \"WHO?\\n\", and the trace has \"ID?\\n\"");
  EXPECT_FALSE(read(*stream)) << "and nothing goes on after that";
}

TEST_F(Replay, AWriteAfterTheEndOfTheTraceIsAnError) {
  auto stream = play("+0.000000000 amp1 open\n+0.000000000 amp1 > \"A\"\n");
  ASSERT_TRUE(write(*stream, "A"));
  EXPECT_EQ(read(*stream, 1s).error().code, ErrorCode::timeout) << "nothing comes any more";
  const auto more = write(*stream, "B");
  ASSERT_FALSE(more);
  EXPECT_NE(more.error().message.find("nothing more written"), std::string::npos);
}

TEST_F(Replay, AConnectionThatFailedThenFailsAgain) {
  auto stream = play("+0.000000000 amp1 open\n+0.500000000 amp1 < \"x\"\n+2.000000000 amp1 ! \"gone\"\n");
  EXPECT_EQ(read(*stream), "x");
  const auto failed = read(*stream);
  ASSERT_FALSE(failed);
  EXPECT_EQ(failed.error().code, ErrorCode::io);
  EXPECT_EQ(failed.error().message, "gone");
  EXPECT_EQ(now(), 2s);
}

TEST_F(Replay, EachOpeningPlaysTheNextSessionOfItsDevice) {
  auto first = play(
      "+0.000000000 amp1 open\n+0.000000000 amp2 open\n+0.100000000 amp1 < \"1\"\n+0.100000000 amp2 < \"2\"\n"
      "+0.200000000 amp1 close\n+5.000000000 amp1 open\n+5.300000000 amp1 < \"3\"\n");
  auto other = open("amp2");
  EXPECT_EQ(read(*first), "1");
  EXPECT_EQ(read(*other), "2");
  auto second = open("amp1");
  EXPECT_EQ(read(*second), "3");
  EXPECT_EQ(now(), 100ms + 300ms);
  run([&]() -> Task<void> {
    description::Device device;
    device.name = "amp1";
    auto third = co_await opener(device);
    EXPECT_FALSE(third);
    device.name = "amp9";
    auto none = co_await opener(device);
    EXPECT_FALSE(none);
    if (!none) {
      EXPECT_EQ(none.error().code, ErrorCode::not_found);
    }
  });
}

TEST_F(Replay, WhatWasTracedInVirtualTimeIsReplayedToTheNanosecond) {
  const auto file =
      std::filesystem::temp_directory_path() / ("replay-" + std::to_string(::getpid()) + ".trace");
  // The driver: asks three times, some time apart, and notes when which bytes came.
  using Heard = std::vector<std::pair<Nanoseconds, std::string>>;
  const auto drive = [this](Opener openIt, Heard& heard) {
    run([&]() -> Task<void> {
      description::Device device;
      device.name = "amp1";
      auto opened = co_await openIt(device);
      EXPECT_TRUE(opened) << opened.error().text();
      if (!opened) co_return;
      auto& stream = **opened;
      for (int k = 0; k < 3; ++k) {
        const std::string request = "R" + std::to_string(k) + "\n";
        auto done = co_await stream.write(bytesOf(request), Instant::max());
        EXPECT_TRUE(done);
        for (int pieces = 0; pieces < 2; ++pieces) {
          auto count = co_await stream.read(into, Instant::max());
          EXPECT_TRUE(count);
          if (!count) co_return;
          heard.emplace_back(now(), textOf(ByteView(into).first(*count)));
        }
        co_await waitFor(clock, 333ms);
      }
    });
  };
  auto pair = memoryPair(clock, "memory");
  std::shared_ptr<Stream> far = std::move(pair.second);
  Opener wired = [&](const description::Device&) -> Task<Result<std::unique_ptr<Stream>>> {
    co_return std::move(pair.first);
  };
  asio::co_spawn(
      context,
      [&]() -> Task<void> {
        std::array<std::byte, 64> piece;
        for (int k = 0;; ++k) {
          auto count = co_await far->read(piece, Instant::max());
          if (!count) co_return;
          co_await waitFor(clock, 1'000'003ns * (k + 1));
          co_await far->write(bytesOf("half \x01"), Instant::max());
          co_await waitFor(clock, 77ns);
          co_await far->write(bytesOf("whole\n"), Instant::max());
        }
      },
      [](std::exception_ptr) {});
  Heard then, again;
  {
    auto traced = tracingOpener(wired, file.string(), clock);
    ASSERT_TRUE(traced) << traced.error().text();
    drive(*traced, then);
  }
  clock = VirtualClock();
  auto replayed = replayOpener(file.string(), clock);
  ASSERT_TRUE(replayed) << replayed.error().text();
  drive(*replayed, again);
  EXPECT_EQ(then.size(), 6u);
  EXPECT_EQ(then, again);
  std::filesystem::remove(file);
}

}  // namespace
}  // namespace shuntwright::transport
