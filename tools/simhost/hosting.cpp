#include "tools/simhost/hosting.h"

#include <fcntl.h>
#include <stdlib.h>
#include <termios.h>
#include <unistd.h>

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/posix/stream_descriptor.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <cerrno>
#include <cstring>

#include "driver/transport/asio_stream.h"
#include "tools/simhost/serve.h"

namespace shuntwright::simhost {

namespace asio = boost::asio;
using asio::ip::tcp;

struct Hosting::State {
  State(asio::io_context& ctx, sim::Bench& b, Clock& c) : context(ctx), bench(b), clock(c) {}
  asio::io_context& context;
  sim::Bench& bench;
  Clock& clock;
  std::vector<int> kept;           ///< slave ends, so that a client that leaves is no end of file for the master
  std::vector<std::string> links;
};

Hosting::Hosting(asio::io_context& context, sim::Bench& bench, Clock& clock)
    : state_(std::make_unique<State>(context, bench, clock)) {}

Hosting::~Hosting() {
  for (const int slave : state_->kept) ::close(slave);
  for (const auto& link : state_->links) ::unlink(link.c_str());
}

namespace {

Task<void> acceptAll(std::shared_ptr<tcp::acceptor> acceptor, sim::Device* device, Clock* clock, std::string name) {
  for (;;) {
    tcp::socket socket = co_await acceptor->async_accept(asio::use_awaitable);
    boost::system::error_code ignored;
    socket.set_option(tcp::no_delay(true), ignored);
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

Result<Served> Hosting::onPty(const std::string& device, const std::string& link) {
  const auto wrong = [&](const char* what) {
    return fail(ErrorCode::io, std::string(what) + ": " + std::strerror(errno), link, "check the folder");
  };
  const int master = ::posix_openpt(O_RDWR | O_NOCTTY | O_CLOEXEC);
  if (master < 0 || ::grantpt(master) != 0 || ::unlockpt(master) != 0) return wrong("cannot make a pseudo terminal");
  char slaveName[128];
  if (::ptsname_r(master, slaveName, sizeof slaveName) != 0) return wrong("cannot make a pseudo terminal");
  const int slave = ::open(slaveName, O_RDWR | O_NOCTTY | O_CLOEXEC);
  if (slave < 0) return wrong("cannot open the pseudo terminal");
  termios settings{};
  ::tcgetattr(slave, &settings);
  ::cfmakeraw(&settings);
  ::tcsetattr(slave, TCSANOW, &settings);
  ::unlink(link.c_str());
  if (::symlink(slaveName, link.c_str()) != 0) return wrong("cannot link the pseudo terminal");
  state_->kept.push_back(slave);
  state_->links.push_back(link);

  asio::posix::stream_descriptor descriptor(state_->context, master);
  std::shared_ptr<transport::Stream> stream = std::make_shared<transport::AsioStream<asio::posix::stream_descriptor>>(
      state_->clock, "pty:" + link, std::move(descriptor));
  sim::Device* one = &state_->bench.device(device);
  Clock* clock = &state_->clock;
  asio::co_spawn(
      state_->context, [stream, one, clock]() -> Task<void> { return serve(stream, *one, *clock); }, asio::detached);
  return Served{device, "serial:" + link};
}

}  // namespace shuntwright::simhost
