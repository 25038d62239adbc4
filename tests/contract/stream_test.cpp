// One list of promises for every transport::Stream that connects to something.

#include <fcntl.h>
#include <gtest/gtest.h>
#include <termios.h>
#include <unistd.h>
#include <array>
#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/posix/stream_descriptor.hpp>
#include <boost/system/system_error.hpp>
#include <cstdlib>
#include <string>

#include "driver/core/async.h"
#include "driver/transport/asio_stream.h"
#include "driver/transport/baud_rate.h"
#include "driver/transport/memory_stream.h"
#include "driver/transport/serial_stream.h"
#include "driver/transport/tcp_stream.h"

namespace shuntwright::transport {
namespace {

namespace asio = boost::asio;
using asio::ip::tcp;
using namespace std::chrono_literals;

/// A connected pair: `near` is what is tested, `far` the device's side.
struct MemoryWorld {
  static constexpr bool kKeepsBytesOfAClosedEnd = true;
  asio::io_context context;
  VirtualClock clock;
  std::unique_ptr<Stream> near, far;

  Task<void> connect() {
    auto pair = memoryPair(clock, "memory");
    near = std::move(pair.first);
    far = std::move(pair.second);
    co_return;
  }
  void run(const std::function<bool()>& done) { runVirtual(context, clock, done); }
};

struct RealWorld {
  asio::io_context context;
  RealClock clock{context};
  std::unique_ptr<Stream> near, far;
  void run(const std::function<bool()>& done) {
    context.restart();
    const Instant limit = clock.now() + 20s;
    while (!done() && clock.now() < limit) context.run_one_for(std::chrono::milliseconds(100));
  }
};

struct TcpWorld : RealWorld {
  static constexpr bool kKeepsBytesOfAClosedEnd = true;

  Task<void> connect() {
    tcp::acceptor acceptor(context, tcp::endpoint(asio::ip::address_v4::loopback(), 0));
    auto opened = co_await connectTcp(clock, "127.0.0.1", acceptor.local_endpoint().port(), 5s);
    EXPECT_TRUE(opened) << opened.error().text();
    auto socket = co_await acceptor.async_accept(asio::use_awaitable);
    near = std::move(*opened);
    far = std::make_unique<AsioStream<tcp::socket>>(clock, "far", std::move(socket));
  }
};

struct SerialWorld : RealWorld {
  static constexpr bool kKeepsBytesOfAClosedEnd = false;  // a pseudo-terminal drops them when it hangs up

  Task<void> connect() {
    const int master = ::posix_openpt(O_RDWR | O_NOCTTY);
    EXPECT_EQ(::grantpt(master), 0);
    EXPECT_EQ(::unlockpt(master), 0);
    description::SerialSettings settings;
    settings.baud = 250'000;  // not in the standard list
    auto opened = co_await openSerial(clock, ::ptsname(master), settings);
    EXPECT_TRUE(opened) << opened.error().text();
    near = std::move(*opened);
    asio::posix::stream_descriptor descriptor(context, master);
    far = std::make_unique<AsioStream<asio::posix::stream_descriptor>>(clock, "far", std::move(descriptor));
  }
};

template <class World>
class StreamContract : public ::testing::Test {
 protected:
  void SetUp() override {
    run([this]() -> Task<void> { return world.connect(); });
  }
  void run(std::function<Task<void>()> body) {
    bool ended = false;
    std::exception_ptr thrown;
    asio::co_spawn(world.context, body, [&](std::exception_ptr e) {
      ended = true;
      thrown = e;
    });
    world.run([&] { return ended; });
    ASSERT_TRUE(ended) << "it waits for something that never comes";
    if (thrown) std::rethrow_exception(thrown);
  }
  Instant soon(Nanoseconds time = 5s) { return world.clock.now() + time; }

  Task<std::string> readExactly(Stream& from, std::size_t count) {
    std::string out;
    std::array<std::byte, 4096> piece;
    while (out.size() < count) {
      auto got =
          co_await from.read(std::span(piece).first(std::min(piece.size(), count - out.size())), soon());
      EXPECT_TRUE(got) << got.error().text();
      if (!got) break;
      EXPECT_GE(*got, 1u);
      out += textOf(ByteView(piece).first(*got));
    }
    co_return out;
  }
  Task<void> writeAll(Stream& to, std::string text) {
    auto done = co_await to.write(bytesOf(text), soon());
    EXPECT_TRUE(done) << done.error().text();
  }

  World world;
  std::array<std::byte, 64> into;
};

using Worlds = ::testing::Types<MemoryWorld, TcpWorld, SerialWorld>;
TYPED_TEST_SUITE(StreamContract, Worlds);

TYPED_TEST(StreamContract, EveryByteArrivesInOrderBothWays) {
  std::string all;
  for (int k = 0; k < 256; ++k) all += static_cast<char>(k);
  this->run([&]() -> Task<void> {
    co_await this->writeAll(*this->world.near, all);
    const std::string there = co_await this->readExactly(*this->world.far, all.size());
    EXPECT_EQ(there, all);
    co_await this->writeAll(*this->world.far, all);
    const std::string back = co_await this->readExactly(*this->world.near, all.size());
    EXPECT_EQ(back, all);
  });
}

TYPED_TEST(StreamContract, AReadTakesNoMoreThanItsRoomAndLeavesTheRest) {
  this->run([&]() -> Task<void> {
    co_await this->writeAll(*this->world.far, "abcdef");
    const std::string front = co_await this->readExactly(*this->world.near, 2);
    const std::string rest = co_await this->readExactly(*this->world.near, 4);
    EXPECT_EQ(front, "ab");
    EXPECT_EQ(rest, "cdef");
  });
}

TYPED_TEST(StreamContract, MuchMoreThanAnyBufferGoesThrough) {
  std::string much;
  for (int k = 0; k < 300'000; ++k) much += static_cast<char>('a' + k % 26);
  this->run([&]() -> Task<void> {
    std::vector<std::function<Task<void>()>> both;
    both.push_back([&]() -> Task<void> { co_await this->writeAll(*this->world.near, much); });
    both.push_back([&]() -> Task<void> {
      const std::string got = co_await this->readExactly(*this->world.far, much.size());
      EXPECT_TRUE(got == much);
    });
    co_await whenAll(std::move(both));
  });
}

TYPED_TEST(StreamContract, AReadTimesOutAtItsDeadlineAndNothingIsLost) {
  this->run([&]() -> Task<void> {
    const Instant deadline = this->soon(5ms);
    auto none = co_await this->world.near->read(this->into, deadline);
    EXPECT_FALSE(none);
    if (!none) {
      EXPECT_EQ(none.error().code, ErrorCode::timeout);
    }
    EXPECT_GE(this->world.clock.now(), deadline);
    co_await this->writeAll(*this->world.far, "late");
    const std::string late = co_await this->readExactly(*this->world.near, 4);
    EXPECT_EQ(late, "late");
  });
}

TYPED_TEST(StreamContract, CloseEndsAPendingRead) {
  this->run([&]() -> Task<void> {
    auto& clock = this->world.clock;
    clock.at(clock.now() + 2ms, [&] { this->world.near->close(); });
    auto none = co_await this->world.near->read(this->into, Instant::max());
    EXPECT_FALSE(none);
    if (!none) {
      EXPECT_EQ(none.error().code, ErrorCode::io);
    }
  });
}

TYPED_TEST(StreamContract, AfterCloseEverythingFailsAndClosingAgainDoesNothing) {
  this->run([&]() -> Task<void> {
    auto& near = *this->world.near;
    near.close();
    near.close();
    auto read = co_await near.read(this->into, this->soon(10ms));
    EXPECT_FALSE(read);
    if (!read) {
      EXPECT_EQ(read.error().code, ErrorCode::io);
    }
    auto written = co_await near.write(bytesOf("x"), this->soon(10ms));
    EXPECT_FALSE(written);
    if (!written) {
      EXPECT_EQ(written.error().code, ErrorCode::io);
    }
  });
}

TYPED_TEST(StreamContract, WhatAClosedEndHadSentIsReadBeforeTheError) {
  this->run([&]() -> Task<void> {
    if (TypeParam::kKeepsBytesOfAClosedEnd) {
      co_await this->writeAll(*this->world.far, "bye");
      this->world.far->close();
      const std::string last = co_await this->readExactly(*this->world.near, 3);
      EXPECT_EQ(last, "bye");
    } else {
      this->world.far->close();
    }
    auto none = co_await this->world.near->read(this->into, this->soon());
    EXPECT_FALSE(none);
    if (!none) {
      EXPECT_EQ(none.error().code, ErrorCode::io);
      EXPECT_FALSE(none.error().where.empty());
    }
  });
}

TYPED_TEST(StreamContract, TheOtherEndClosingEndsAPendingRead) {
  this->run([&]() -> Task<void> {
    auto& clock = this->world.clock;
    clock.at(clock.now() + 2ms, [&] { this->world.far->close(); });
    auto none = co_await this->world.near->read(this->into, Instant::max());
    EXPECT_FALSE(none);
    if (!none) {
      EXPECT_EQ(none.error().code, ErrorCode::io);
    }
  });
}

TYPED_TEST(StreamContract, CancellationThrowsOutOfAReadAndTheStreamStaysGood) {
  asio::cancellation_signal signal;
  bool cancelled = false;
  asio::co_spawn(
      this->world.context,
      [&]() -> Task<void> {
        auto none = co_await this->world.near->read(this->into, Instant::max());
        EXPECT_FALSE(none) << "it should have thrown";
      },
      asio::bind_cancellation_slot(signal.slot(), [&](std::exception_ptr e) {
        try {
          if (e) std::rethrow_exception(e);
        } catch (const boost::system::system_error& error) {
          cancelled = error.code() == asio::error::operation_aborted;
        }
      }));
  this->run([&]() -> Task<void> {
    co_await waitFor(this->world.clock, 2ms);
    signal.emit(asio::cancellation_type::terminal);
    co_await waitFor(this->world.clock, 1ms);
    EXPECT_TRUE(cancelled);
    co_await this->writeAll(*this->world.far, "on");
    const std::string on = co_await this->readExactly(*this->world.near, 2);
    EXPECT_EQ(on, "on");
  });
}

TYPED_TEST(StreamContract, AStreamMayBeDestroyedWithAReadPending) {
  asio::co_spawn(
      this->world.context,
      [&]() -> Task<void> {
        auto none = co_await this->world.near->read(this->into, Instant::max());
        EXPECT_FALSE(none);
      },
      asio::detached);
  this->run([&]() -> Task<void> {
    co_await waitFor(this->world.clock, 1ms);
    this->world.near.reset();
    co_await waitFor(this->world.clock, 1ms);
  });
}

// ---- what only the real ones can get wrong

using TcpConnect = StreamContract<TcpWorld>;

TEST_F(TcpConnect, ToAPortWhereNobodyListensSaysSo) {
  run([&]() -> Task<void> {
    int port = 0;
    {
      tcp::acceptor gone(world.context, tcp::endpoint(asio::ip::address_v4::loopback(), 0));
      port = gone.local_endpoint().port();
    }
    auto refused = co_await connectTcp(world.clock, "127.0.0.1", port, 5s);
    EXPECT_FALSE(refused);
    if (refused) co_return;
    EXPECT_EQ(refused.error().code, ErrorCode::io);
    EXPECT_EQ(refused.error().where, "tcp:127.0.0.1:" + std::to_string(port));
    EXPECT_NE(refused.error().message.find("cannot connect"), std::string::npos);
  });
}

TEST_F(TcpConnect, TakesANameAndRefusesAnImpossiblePort) {
  run([&]() -> Task<void> {
    tcp::acceptor acceptor(world.context, tcp::endpoint(asio::ip::address_v4::loopback(), 0));
    auto opened = co_await connectTcp(world.clock, "localhost", acceptor.local_endpoint().port(), 5s);
    EXPECT_TRUE(opened);
    auto impossible = co_await connectTcp(world.clock, "127.0.0.1", 0, 5s);
    EXPECT_FALSE(impossible);
    if (!impossible) {
      EXPECT_EQ(impossible.error().code, ErrorCode::bad_use);
    }
  });
}

using SerialOpen = StreamContract<SerialWorld>;

TEST_F(SerialOpen, OfAPortThatIsNotThereSaysSo) {
  run([&]() -> Task<void> {
    description::SerialSettings settings;
    auto missing = co_await openSerial(world.clock, "/dev/no-such-port", settings);
    EXPECT_FALSE(missing);
    if (missing) co_return;
    EXPECT_EQ(missing.error().code, ErrorCode::io);
    EXPECT_EQ(missing.error().where, "serial:/dev/no-such-port");
    EXPECT_FALSE(missing.error().remedy.empty());
  });
}

TEST_F(SerialOpen, TakesStandardAndUnusualBaudRates) {
  for (const int baud : {9600, 115'200, 921'600, 250'000, 76'800}) {
    run([&]() -> Task<void> {
      const int master = ::posix_openpt(O_RDWR | O_NOCTTY);
      ::grantpt(master);
      ::unlockpt(master);
      description::SerialSettings settings;
      settings.baud = baud;
      settings.stopBits = 2;
      settings.flow = description::SerialSettings::Flow::hardware;
      auto opened = co_await openSerial(world.clock, ::ptsname(master), settings);
      EXPECT_TRUE(opened) << baud;
      termios seen{};
      EXPECT_EQ(::tcgetattr(master, &seen), 0);
      EXPECT_TRUE(seen.c_cflag & CRTSCTS);
      EXPECT_TRUE(seen.c_cflag & CSTOPB);
      EXPECT_EQ(baudRate(master), baud);
      ::close(master);
    });
  }
}

}  // namespace
}  // namespace shuntwright::transport
