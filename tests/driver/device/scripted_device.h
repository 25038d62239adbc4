#pragma once

#include <gtest/gtest.h>
#include <array>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/io_context.hpp>
#include <functional>
#include <memory>
#include <string>
#include <vector>

#include "driver/core/async.h"
#include "driver/core/clock.h"
#include "driver/description/load.h"
#include "driver/device/device.h"
#include "driver/transport/memory_stream.h"

namespace shuntwright::test {

using namespace std::chrono_literals;

/// What a device written by hand for one test sends: a piece of bytes, some time after it was asked.
struct Piece {
  Nanoseconds after{0};
  std::string bytes;
};

/// Two wire ends and the hand-written device at one of them. It knows nothing of profiles: it gets whole
/// requests (up to `requestEnd`) and says what to send back.
class ScriptedDevice {
 public:
  using Handler = std::function<std::vector<Piece>(const std::string& request)>;

  ScriptedDevice(boost::asio::io_context& context, Clock& clock) : context_(context), clock_(clock) {}

  Handler answer = [](const std::string&) { return std::vector<Piece>{}; };
  std::string requestEnd = "\n";
  std::vector<std::string> requests;  ///< all that came, without their end
  std::vector<Instant> requestTimes;

  transport::Opener opener() {
    return [this](const description::Device& device) { return open(device); };
  }

  /// Sends without being asked.
  void send(std::string bytes, Nanoseconds after = 0ns) {
    clock_.at(clock_.now() + after, [this, bytes = std::move(bytes)] {
      boost::asio::co_spawn(
          context_, [this, bytes]() -> Task<void> { return write(bytes); }, boost::asio::detached);
    });
  }
  void unplug() { state_->end->close(); }

 private:
  struct State {
    std::unique_ptr<transport::Stream> end;
  };

  Task<Result<std::unique_ptr<transport::Stream>>> open(const description::Device& device) {
    auto pair = transport::memoryPair(clock_, device.port.text);
    state_->end = std::move(pair.second);
    boost::asio::co_spawn(
        context_, [this]() -> Task<void> { return serve(); }, boost::asio::detached);
    co_return std::move(pair.first);
  }

  Task<void> write(std::string bytes) { co_await state_->end->write(bytesOf(bytes), Instant::max()); }

  Task<void> serve() {
    std::array<std::byte, 256> piece;
    std::string pending;
    for (;;) {
      auto count = co_await state_->end->read(piece, Instant::max());
      if (!count) co_return;
      pending += textOf(ByteView(piece).first(*count));
      for (std::size_t end; (end = pending.find(requestEnd)) != std::string::npos;) {
        const std::string request = pending.substr(0, end);
        pending.erase(0, end + requestEnd.size());
        requests.push_back(request);
        requestTimes.push_back(clock_.now());
        for (auto& out : answer(request)) send(out.bytes, out.after);
      }
    }
  }

  boost::asio::io_context& context_;
  Clock& clock_;
  std::shared_ptr<State> state_ = std::make_shared<State>();
};

/// A device under test at a scripted device, in virtual time.
class DeviceTest : public ::testing::Test {
 protected:
  boost::asio::io_context context;
  VirtualClock clock;
  ScriptedDevice wire{context, clock};
  description::Device described;
  std::unique_ptr<device::Device> device;

  /// Profile text; the head and the reach are put before it.
  void profile(const std::string& body) {
    const std::string head =
        "[profile]\nname = \"scripted\"\ntitle = \"Scripted\"\n[reach.tcp]\nport = 5025\n";
    description::Diagnostics diagnostics;
    auto parsed = description::parseProfile(head + body, "scripted.toml", diagnostics);
    ASSERT_TRUE(parsed) << diagnostics.render(false);
    described.name = "amp1";
    described.port.text = "tcp:10.0.0.7:5025";
    described.profile = std::make_shared<description::Profile>(std::move(*parsed));
  }

  /// Runs a coroutine to its end in virtual time.
  void run(std::function<Task<void>()> body) {
    bool ended = false;
    std::exception_ptr thrown;
    boost::asio::co_spawn(context, body, [&](std::exception_ptr e) {
      ended = true;
      thrown = e;
    });
    runVirtual(context, clock, [&] { return ended; });
    ASSERT_TRUE(ended) << "it waits for something that never comes";
    if (thrown) std::rethrow_exception(thrown);
  }

  void open() {
    run([this]() -> Task<void> {
      auto opened = co_await device::Device::open(described, wire.opener(), clock);
      EXPECT_TRUE(opened) << opened.error().text();
      if (opened) device = std::move(*opened);
    });
  }

  template <class T>
  Result<T> await(std::function<Task<Result<T>>()> call) {
    Result<T> out = fail(ErrorCode::bad_use, "not run");
    run([&]() -> Task<void> { out = co_await call(); });
    return out;
  }

  Result<device::SampleBlock> next(Nanoseconds limit = 1s) {
    return await<device::SampleBlock>([this, limit] { return device->next(clock.now() + limit); });
  }
  Result<void> closeRelay(int relay) {
    return await<void>([this, relay] { return device->closeRelay(relay); });
  }
  Result<void> start(double rate_Hz) {
    return await<void>([this, rate_Hz] { return device->start(rate_Hz * units::hertz); });
  }
  Result<void> stop() {
    return await<void>([this] { return device->stop(); });
  }
  void pass(Nanoseconds time) {
    run([this, time]() -> Task<void> { co_await waitFor(clock, time); });
  }

  /// From the start of the test.
  Nanoseconds since(Instant when) const { return when - VirtualClock::kDefaultStart; }
};

}  // namespace shuntwright::test
