#include "driver/transport/port_opener.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <map>

#include "driver/transport/replay_stream.h"
#include "driver/transport/serial_stream.h"
#include "driver/transport/tcp_stream.h"

namespace shuntwright::transport {

using description::Port;

namespace {

/// Openers of the traces that the rack's devices share.
using Replays = std::map<std::string, Opener>;

Task<Result<std::unique_ptr<Stream>>> openPort(std::shared_ptr<Replays> replays, Clock* clock,
                                               Nanoseconds limit, const description::Device& device) {
  using Opened = Result<std::unique_ptr<Stream>>;
  const Port& port = device.port;
  switch (port.kind) {
    case Port::Kind::serial: {
      const auto settings = device.profile->serial.value_or(description::SerialSettings{});
      co_return co_await openSerial(*clock, port.path, settings);
    }
    case Port::Kind::tcp: {
      const int fallback = device.profile->tcp ? device.profile->tcp->port : 0;
      const int number = port.tcpPort > 0 ? port.tcpPort : fallback;
      co_return co_await connectTcp(*clock, port.path, number, limit);
    }
    case Port::Kind::replay: {
      auto found = replays->find(port.path);
      if (found == replays->end()) {
        auto opener = replayOpener(port.path, *clock);
        if (!opener) co_return Opened(std::unexpected(std::move(opener.error())));
        found = replays->emplace(port.path, std::move(*opener)).first;
      }
      co_return co_await found->second(device);
    }
  }
  co_return Opened(fail(ErrorCode::bad_use, "a port of an unknown kind", port.text));
}

}  // namespace

Result<std::optional<Instant>> replayStart(const description::Rack& rack) {
  std::optional<Instant> earliest;
  for (const auto& device : rack.devices) {
    if (device.port.kind != Port::Kind::replay) return std::optional<Instant>();
    auto trace = loadTrace(device.port.path);
    if (!trace) return std::unexpected(std::move(trace.error()).wrap("device " + device.name + " cannot be replayed"));
    earliest = std::min(earliest.value_or(trace->start), trace->start);
  }
  return earliest;
}

Opener portOpener(Clock& clock, Nanoseconds connectLimit) {
  auto replays = std::make_shared<Replays>();
  return [replays, clock = &clock, connectLimit](const description::Device& device) {
    return openPort(replays, clock, connectLimit, device);
  };
}

}  // namespace shuntwright::transport
