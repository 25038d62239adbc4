#include "driver/device/poller.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/this_coro.hpp>
#include <cmath>

namespace shuntwright::device {

namespace asio = boost::asio;

Poller::Poller(std::shared_ptr<Connection> connection, units::Frequency rate)
    : connection_(std::move(connection)), rate_Hz_(rate.in(units::hertz)) {
  const auto inputs = static_cast<std::size_t>(connection_->profile().inputs->count);
  ratio_.resize(inputs);
  flags_.resize(inputs);
}

Instant Poller::tick(std::uint64_t number) const {
  // From the whole number of ticks, so that rounding never adds up.
  return start_ + Nanoseconds(std::llround(static_cast<double>(number) * 1e9 / rate_Hz_));
}

Task<void> Poller::start() {
  auto executor = co_await asio::this_coro::executor;
  auto self = shared_from_this();
  start_ = connection_->clock().now();
  wanted_ = running_ = true;
  asio::co_spawn(
      executor, [self]() -> Task<void> { return self->run(); }, asio::detached);
}

Task<void> Poller::stop() {
  auto self = shared_from_this();
  halt();
  while (running_) co_await changed_.wait();
}

void Poller::halt() {
  wanted_ = false;
  changed_.notifyAll();
}

Task<void> Poller::run() {
  auto self = shared_from_this();
  Clock& clock = connection_->clock();
  std::uint64_t number = 0;
  while (wanted_ && !connection_->failure()) {
    const Instant due = tick(number);
    if (clock.now() < due) {
      co_await changed_.wait(clock, due);
      continue;
    }
    co_await read();
    const std::uint64_t asked = number++;
    const double passed = std::floor(seconds(clock.now() - start_) * rate_Hz_);
    number = std::max(number, static_cast<std::uint64_t>(std::max(passed, 0.0)));
    while (tick(number) < clock.now()) ++number;
    if (auto* queue = connection_->queue(); queue && number > asked + 1) queue->noteLost(number - asked - 1);
  }
  running_ = false;
  changed_.notifyAll();
}

Task<void> Poller::read() {
  const auto& inputs = *connection_->profile().inputs;
  std::vector<protocol::Value> values;
  values.push_back({"first", static_cast<long long>(inputs.first)});
  values.push_back({"last", static_cast<long long>(inputs.first + inputs.count - 1)});
  Connection::Accept accept = [this](const protocol::TextDialect& dialect) {
    return dialect.values(ratio_, flags_);
  };
  auto done = co_await connection_->ask(*inputs.read, std::move(values), std::move(accept));
  SampleQueue* queue = connection_->queue();
  if (!queue || !wanted_) co_return;
  if (done) {
    queue->push(done->middle(), ratio_, flags_);
    error_.reset();  // it answers again; what was lost is in the count
  } else {
    queue->noteLost(1);
    error_ = std::move(done.error());
  }
  connection_->arrived().notifyAll();
}

}  // namespace shuntwright::device
