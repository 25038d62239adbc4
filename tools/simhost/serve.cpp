#include "tools/simhost/serve.h"

#include <algorithm>
#include <array>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/this_coro.hpp>

#include "driver/transport/memory_stream.h"

namespace shuntwright::simhost {

namespace asio = boost::asio;

namespace {
// A device whose client reads nothing for so long has lost what it had to say.
constexpr Nanoseconds kPatience = std::chrono::seconds(10);
}  // namespace

Task<void> serve(std::shared_ptr<transport::Stream> stream, sim::Device& device, Clock& clock) {
  std::array<std::byte, 4096> buffer;
  device.connected(clock.now());
  for (;;) {
    const Bytes out = device.take();
    if (!out.empty()) {
      const Instant began = clock.now();
      auto sent = co_await stream->write(out, Instant::max());
      if (!sent) co_return;
      if (clock.now() - began > kPatience) device.connected(clock.now());
    }
    if (device.absentUntil(clock.now())) {
      stream->close();
      co_return;
    }
    auto got = co_await stream->read(buffer, device.nextEvent());
    if (got) {
      device.feed(std::span(buffer.data(), *got), clock.now());
    } else if (got.error().code == ErrorCode::timeout) {
      device.advance(clock.now());
    } else {
      co_return;
    }
  }
}

transport::Opener memoryOpener(sim::Bench& bench, Clock& clock) {
  return [&bench, &clock](const description::Device& described) -> Task<Result<std::unique_ptr<transport::Stream>>> {
    // Not a coroutine itself: its captures would die with the call.
    struct Open {
      static Task<Result<std::unique_ptr<transport::Stream>>> run(sim::Bench* bench, Clock* clock, std::string name) {
        auto executor = co_await asio::this_coro::executor;
        if (bench->device(name).absentUntil(clock->now())) {
          co_return fail(ErrorCode::io, "nothing is connected there", "simulated:" + name, "plug the device in");
        }
        transport::StreamPair ends = transport::memoryPair(*clock, "simulated:" + name);
        std::shared_ptr<transport::Stream> far = std::move(ends.second);
        sim::Device* device = &bench->device(name);
        asio::co_spawn(
            executor, [far, device, clock]() -> Task<void> { return serve(far, *device, *clock); }, asio::detached);
        co_return Result<std::unique_ptr<transport::Stream>>(std::move(ends.first));
      }
    };
    return Open::run(&bench, &clock, described.name);
  };
}

Instant ScaledClock::now() const {
  return start_ + fromSeconds(seconds(real_.now() - start_) * speed_);
}

Clock::Ticket ScaledClock::at(Instant when, std::function<void()> callback) {
  // Slowed down, what is centuries away has no place in 64 bits of nanoseconds.
  constexpr double kLongest_s = 1e9;
  return real_.at(start_ + fromSeconds(std::min(seconds(when - start_) / speed_, kLongest_s)), std::move(callback));
}

}  // namespace shuntwright::simhost
