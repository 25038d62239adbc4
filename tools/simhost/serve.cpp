#include "tools/simhost/serve.h"

#include <array>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/this_coro.hpp>

#include "driver/transport/memory_stream.h"

namespace shuntwright::simhost {

namespace asio = boost::asio;

Task<void> serve(std::shared_ptr<transport::Stream> stream, sim::Device& device, Clock& clock) {
  std::array<std::byte, 4096> buffer;
  for (;;) {
    const Bytes out = device.take();
    if (!out.empty()) {
      auto sent = co_await stream->write(out, Instant::max());
      if (!sent) co_return;
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
  return real_.at(start_ + fromSeconds(seconds(when - start_) / speed_), std::move(callback));
}

}  // namespace shuntwright::simhost
