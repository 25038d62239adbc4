#include "driver/transport/failing_stream.h"

#include <gtest/gtest.h>
#include <array>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/io_context.hpp>
#include <functional>

#include "driver/transport/memory_stream.h"

namespace shuntwright::transport {
namespace {

/// How many of open, write, read, write, read succeed.
std::vector<bool> fiveOperations(std::shared_ptr<FailPoint> point) {
  boost::asio::io_context context;
  VirtualClock clock;
  std::vector<bool> done;
  const std::function<Task<void>()> body = [&]() -> Task<void> {
    auto pair = memoryPair(clock, "memory");
    Opener plain = [&](const description::Device&) -> Task<Result<std::unique_ptr<Stream>>> {
      co_return std::move(pair.first);
    };
    description::Device device;
    const Opener opener = failingOpener(plain, point);
    auto opened = co_await opener(device);
    done.push_back(opened.has_value());
    if (!opened) co_return;
    std::array<std::byte, 8> into;
    for (int k = 0; k < 2; ++k) {
      auto written = co_await (*opened)->write(bytesOf("x"), Instant::max());
      done.push_back(written.has_value());
      auto answered = co_await pair.second->write(bytesOf("y"), Instant::max());
      EXPECT_TRUE(answered);
      auto read = co_await (*opened)->read(into, Instant::max());
      done.push_back(read.has_value());
      if (!read) {
        EXPECT_EQ(read.error().code, point->code);
      }
    }
  };
  boost::asio::co_spawn(context, body, boost::asio::detached);
  runVirtual(context, clock);
  return done;
}

TEST(FailingStream, FailsTheNthOperationOnce) {
  for (std::uint64_t n = 1; n <= 6; ++n) {
    auto point = std::make_shared<FailPoint>();
    point->failAt = n;
    const auto done = fiveOperations(point);
    for (std::size_t k = 0; k < done.size(); ++k) EXPECT_EQ(done[k], k + 1 != n) << n;
    EXPECT_EQ(done.size(), n == 1 ? 1u : 5u);
    EXPECT_EQ(point->count < n, n == 6) << "six is more than there are";
  }
}

TEST(FailingStream, OrFailsFromThenOn) {
  auto point = std::make_shared<FailPoint>();
  point->failAt = 3;
  point->kind = FailPoint::Kind::from_then_on;
  point->code = ErrorCode::timeout;
  EXPECT_EQ(fiveOperations(point), (std::vector<bool>{true, true, false, false, false}));
}

}  // namespace
}  // namespace shuntwright::transport
