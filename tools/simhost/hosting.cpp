#include "tools/simhost/hosting.h"

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/posix/stream_descriptor.hpp>
#include <boost/asio/redirect_error.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <algorithm>
#include <map>

#include "driver/transport/asio_stream.h"
#include "tools/simhost/pty_link.h"
#include "tools/simhost/serve.h"

namespace shuntwright::simhost {

namespace asio = boost::asio;
using asio::ip::tcp;

struct Hosting::State {
  State(asio::io_context& ctx, sim::Bench& b, Clock& c) : context(ctx), bench(b), clock(c) {}
  asio::io_context& context;
  sim::Bench& bench;
  Clock& clock;
  std::map<std::string, std::unique_ptr<PtyLink>> ptys;  ///< by device
};

Hosting::Hosting(asio::io_context& context, sim::Bench& bench, Clock& clock)
    : state_(std::make_shared<State>(context, bench, clock)) {}

Hosting::~Hosting() { state_->ptys.clear(); }

namespace {

// What stands between two tries after an error of the system (no file descriptors left, say).
constexpr Nanoseconds kRetry = std::chrono::seconds(1);

Task<void> acceptAll(std::shared_ptr<tcp::acceptor> acceptor, sim::Device* device, Clock* clock, std::string name) {
  for (;;) {
    tcp::socket socket(acceptor->get_executor());
    boost::system::error_code ec;
    co_await acceptor->async_accept(socket, asio::redirect_error(asio::use_awaitable, ec));
    if (ec) {
      co_await waitFor(*clock, kRetry);
      continue;
    }
    socket.set_option(tcp::no_delay(true), ec);
    std::shared_ptr<transport::Stream> stream =
        std::make_shared<transport::AsioStream<tcp::socket>>(*clock, name, std::move(socket));
    co_await serve(stream, *device, *clock);
  }
}

}  // namespace

Result<Served> Hosting::onTcp(const std::string& device, int port) {
  boost::system::error_code ec;
  auto acceptor = std::make_shared<tcp::acceptor>(state_->context);
  const tcp::endpoint endpoint(asio::ip::address_v4::loopback(), static_cast<unsigned short>(port));
  acceptor->open(endpoint.protocol(), ec);
  if (!ec) acceptor->set_option(tcp::acceptor::reuse_address(true), ec);
  if (!ec) acceptor->bind(endpoint, ec);
  if (!ec) acceptor->listen(1, ec);
  const std::string name = "tcp:127.0.0.1:" + std::to_string(ec ? port : acceptor->local_endpoint(ec).port());
  if (ec) {
    return fail(ErrorCode::io, "cannot listen: " + ec.message(), name,
                "end what uses the port, or serve on free ports with --port-base");
  }
  sim::Device* one = &state_->bench.device(device);
  Clock* clock = &state_->clock;
  asio::co_spawn(
      state_->context, [acceptor, one, clock, name]() -> Task<void> { return acceptAll(acceptor, one, clock, name); },
      asio::detached);
  return Served{device, name};
}

/// Serves one device on its pseudo terminal; when its plug is pulled the terminal goes, and a new one comes with it.
Task<void> Hosting::servePty(std::shared_ptr<State> state, std::string device, std::string link) {
  sim::Device& simulated = state->bench.device(device);
  for (;;) {
    auto& pty = state->ptys[device];
    if (!pty) {
      auto made = PtyLink::make(link);
      if (!made) co_return;
      pty = std::move(*made);
    }
    std::shared_ptr<transport::Stream> stream = std::make_shared<transport::AsioStream<asio::posix::stream_descriptor>>(
        state->clock, "pty:" + link, asio::posix::stream_descriptor(state->context, pty->takeMaster()));
    co_await serve(stream, simulated, state->clock);
    stream->close();
    pty.reset();
    const Instant now = state->clock.now(), back = simulated.absentUntil(now).value_or(now + kRetry);
    if (back == Instant::max()) co_return;
    co_await waitUntil(state->clock, back);
  }
}

Result<Served> Hosting::onPty(const std::string& device, const std::string& link) {
  auto pty = PtyLink::make(link);
  if (!pty) return std::unexpected(std::move(pty.error()));
  state_->ptys[device] = std::move(*pty);
  asio::co_spawn(
      state_->context,
      [state = state_, device, link]() -> Task<void> { return servePty(state, device, link); }, asio::detached);
  return Served{device, "serial:" + link};
}

}  // namespace shuntwright::simhost
