#include "driver/device/text_device.h"

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <cmath>

#include "driver/core/bytes.h"
#include "driver/device/poller.h"

namespace shuntwright::device {

using description::Exchange;
using protocol::TextDialect;
using protocol::Value;

namespace {

constexpr double kKept_s = 10;  // of samples in the queue

std::vector<Value> one(std::string_view name, double value) {
  return {Value{name, value}};
}
std::vector<Value> one(std::string_view name, int value) {
  return {Value{name, static_cast<long long>(value)}};
}

}  // namespace

Task<Result<std::unique_ptr<Device>>> Device::open(const description::Device& described,
                                                   const transport::Opener& opener, Clock& clock) {
  using Opened = Result<std::unique_ptr<Device>>;
  auto stream = co_await opener(described);
  if (!stream) {
    co_return Opened(
        std::unexpected(std::move(stream.error())
                            .wrap("the device cannot be reached",
                                  "device " + described.name + " (" + described.port.text + ")")));
  }
  auto connection = std::make_shared<Connection>(described, std::move(*stream), clock);
  co_await connection->startReader();
  co_return Opened(std::make_unique<TextDevice>(std::move(connection)));
}

Task<Result<void>> TextDevice::work(const Exchange& exchange, std::vector<Value> values) {
  auto connection = connection_;
  auto done = co_await connection->ask(exchange, std::move(values));
  if (!done) co_return std::unexpected(std::move(done.error()));
  co_return Result<void>{};
}

Task<Result<Identity>> TextDevice::identify() {
  auto connection = connection_;
  const auto& asked = connection->profile().identify;
  const std::string& expectedSerial = connection->described().serialNumber;
  Identity identity;
  if (!asked) {
    if (!expectedSerial.empty()) {
      co_return fail(
          ErrorCode::refused,
          "the rack expects serial number \"" + expectedSerial + "\", but the profile has no [identify]",
          connection->where(),
          "take the serial number out of the rack, or add [identify] to " + connection->profile().file);
    }
    co_return identity;
  }
  auto accept = [&identity](const TextDialect& dialect) -> Result<void> {
    identity.model = dialect.fields()["model"];
    identity.serialNumber = dialect.fields()["serial"];
    identity.version = dialect.fields()["version"];
    return {};
  };
  auto done = co_await connection->ask(asked->exchange, {}, accept);
  if (!done) co_return std::unexpected(std::move(done.error()));
  if (!asked->model.empty() && identity.model != asked->model) {
    co_return fail(ErrorCode::refused,
                   "the device says it is a " + quoted(identity.model) + "; the profile is for " +
                       quoted(asked->model) + " (" + asked->exchange.place.text() + ")",
                   connection->where(), "check that the rack's port leads to this device, and its profile");
  }
  if (!expectedSerial.empty() && identity.serialNumber != expectedSerial) {
    co_return fail(ErrorCode::refused,
                   "the device has serial number " + quoted(identity.serialNumber) + "; the rack expects " +
                       quoted(expectedSerial) + " (" + connection->described().place.text() + ")",
                   connection->where(), "check that cables or addresses are not swapped");
  }
  co_return identity;
}

Task<Result<void>> TextDevice::setRate(units::Frequency rate) {
  auto connection = connection_;
  const auto& inputs = connection->profile().inputs;
  if (!inputs || !inputs->setRate) co_return Result<void>{};
  auto done = co_await work(*inputs->setRate, one("rate", rate.in(units::hertz)));
  if (done) rate_ = rate;
  co_return done;
}

Task<Result<void>> TextDevice::setExcitation(units::Voltage excitation) {
  auto connection = connection_;
  const auto& inputs = connection->profile().inputs;
  if (!inputs || !inputs->setExcitation) co_return Result<void>{};
  co_return co_await work(*inputs->setExcitation, one("excitation", excitation.in(units::volt)));
}

// ---------------------------------------------------------------- relays

Result<void> TextDevice::checkRelay(int relay) const {
  const auto& relays = connection_->profile().relays;
  if (!relays) {
    return fail(ErrorCode::bad_use, "the device has no relays", connection_->where());
  }
  if (relay < relays->first || relay >= relays->first + relays->count) {
    return fail(ErrorCode::bad_use,
                "there is no relay " + std::to_string(relay) + "; they are numbered " +
                    std::to_string(relays->first) + " to " +
                    std::to_string(relays->first + relays->count - 1),
                connection_->where());
  }
  return {};
}

Task<Result<void>> TextDevice::closeRelay(int relay) {
  if (auto known = checkRelay(relay); !known) co_return known;
  co_return co_await work(connection_->profile().relays->close, one("relay", relay));
}

Task<Result<void>> TextDevice::openRelay(int relay) {
  if (auto known = checkRelay(relay); !known) co_return known;
  co_return co_await work(connection_->profile().relays->open, one("relay", relay));
}

Task<Result<void>> TextDevice::openAllRelays() {
  const auto& relays = connection_->profile().relays;
  if (!relays) co_return Result<void>{};
  if (relays->openAll) co_return co_await work(*relays->openAll, {});
  // Every one is tried, whatever becomes of the others.
  Result<void> first;
  for (int k = 0; k < relays->count; ++k) {
    auto opened = co_await openRelay(relays->first + k);
    if (!opened && first) first = std::move(opened);
    if (!first && connection_->failure()) break;
  }
  co_return first;
}

Task<Result<bool>> TextDevice::relayClosed(int relay) {
  if (auto known = checkRelay(relay); !known) co_return std::unexpected(std::move(known.error()));
  auto connection = connection_;
  const auto& relays = *connection->profile().relays;
  if (!relays.state) {
    co_return fail(ErrorCode::not_found, "the profile has no [relays.state]: relays cannot be read back",
                   connection->where());
  }
  bool closed = false;
  auto accept = [&closed, &relays](const TextDialect& dialect) -> Result<void> {
    const std::string_view state = dialect.fields()["state"];
    closed = state == relays.closedWord;
    if (closed || state == relays.openWord) return {};
    return fail(ErrorCode::bad_answer, "{state} is " + quoted(state) + ", neither closed " +
                                           quoted(relays.closedWord) + " nor open " +
                                           quoted(relays.openWord));
  };
  auto done = co_await connection->ask(*relays.state, one("relay", relay), accept);
  if (!done) co_return std::unexpected(std::move(done.error()));
  co_return closed;
}

// ---------------------------------------------------------------- samples

Task<Result<void>> TextDevice::start(units::Frequency rate) {
  auto connection = connection_;
  const auto& inputs = connection->profile().inputs;
  if (!inputs) co_return fail(ErrorCode::bad_use, "the device has no inputs", connection->where());
  const double rate_Hz = rate.in(units::hertz);
  if (!(rate_Hz > 0) || !std::isfinite(rate_Hz)) {
    co_return fail(ErrorCode::bad_use, "the sample rate must be above 0 Hz", connection->where());
  }
  if (running_) {
    if (auto stopped = co_await stop(); !stopped) co_return stopped;
  }
  if (inputs->setRate && rate_ != rate) {
    if (auto set = co_await setRate(rate); !set) co_return set;
  }
  const auto limit = static_cast<std::size_t>(std::ceil(kKept_s * rate_Hz));
  const Nanoseconds period(std::llround(1e9 / rate_Hz));
  running_ = true;
  connection->openQueue(limit, period, inputs->streams());
  if (!inputs->streams()) {
    poller_ = std::make_shared<Poller>(connection, rate);
    co_await poller_->start();
    co_return Result<void>{};
  }
  auto started = co_await work(*inputs->streamStart, one("rate", rate_Hz));
  if (!started) {
    running_ = false;
    connection->closeQueue();
  }
  co_return started;
}

Task<Result<SampleBlock>> TextDevice::next(Instant deadline) {
  auto connection = connection_;
  auto poller = poller_;
  for (;;) {
    SampleQueue* queue = connection->queue();
    if (queue && !queue->empty()) co_return queue->take();
    if (poller) {
      if (auto error = poller->takeError()) co_return std::unexpected(std::move(*error));
    }
    if (connection->failure()) co_return std::unexpected(*connection->failure());
    if (!running_) co_return fail(ErrorCode::bad_use, "no sampling is under way", connection->where());
    const bool heard = co_await connection->arrived().wait(connection->clock(), deadline);
    if (!heard) {
      if (queue && !queue->empty()) continue;
      co_return fail(ErrorCode::timeout, "no samples came in time", connection->where(),
                     "check that the device still streams, and at which rate");
    }
  }
}

SampleBlock TextDevice::rest() {
  SampleQueue* queue = connection_->queue();
  return queue ? queue->take() : SampleBlock{};
}

Task<Result<void>> TextDevice::stop() {
  auto connection = connection_;
  if (!running_) co_return Result<void>{};
  running_ = false;
  if (poller_) {
    auto poller = std::exchange(poller_, nullptr);
    connection->closeQueue();
    co_await poller->stop();
    co_return Result<void>{};
  }
  auto stopped = co_await work(*connection->profile().inputs->streamStop, {});
  connection->closeQueue();
  co_return stopped;
}

void TextDevice::close() {
  running_ = false;
  if (poller_) poller_->halt();
  connection_->close();
}

}  // namespace shuntwright::device
