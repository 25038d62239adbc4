#include "driver/transport/tcp_stream.h"

#include <boost/asio/connect.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/this_coro.hpp>

#include "driver/transport/asio_stream.h"

namespace shuntwright::transport {

namespace asio = boost::asio;
using asio::ip::tcp;
using boost::system::error_code;

namespace {

Result<std::vector<tcp::endpoint>> literalAddress(const std::string& host, int port) {
  error_code ec;
  const auto address = asio::ip::make_address(host, ec);
  std::vector<tcp::endpoint> out;
  if (!ec) out.emplace_back(address, static_cast<unsigned short>(port));
  return out;
}

}  // namespace

Task<Result<std::unique_ptr<Stream>>> connectTcp(Clock& clock, std::string host, int port,
                                                 Nanoseconds limit) {
  using Opened = Result<std::unique_ptr<Stream>>;
  auto executor = co_await asio::this_coro::executor;
  const std::string name = "tcp:" + host + ":" + std::to_string(port);
  const Instant deadline = clock.now() + limit;
  if (port < 1 || port > 65535) {
    co_return Opened(fail(ErrorCode::bad_use, "a TCP port is a number from 1 to 65535", name));
  }

  auto endpoints = std::make_shared<std::vector<tcp::endpoint>>(*literalAddress(host, port));
  if (endpoints->empty()) {
    auto resolver = std::make_shared<tcp::resolver>(executor);
    auto start = [resolver, endpoints, host, port](auto handler) {
      resolver->async_resolve(host, std::to_string(port),
                              [resolver, endpoints, h = std::move(handler)](
                                  error_code ec, tcp::resolver::results_type found) mutable {
                                for (const auto& entry : found) endpoints->push_back(entry.endpoint());
                                std::move(h)(ec, std::size_t{0});
                              });
    };
    const IoOutcome found = co_await withDeadline(clock, deadline, start);
    if (found.error) {
      co_return Opened(fail(ErrorCode::io,
                            "the host \"" + host + "\" cannot be found: " + found.error.message(), name,
                            "check the host name in the rack, or give its address"));
    }
  }

  auto socket = std::make_shared<tcp::socket>(executor);
  auto start = [socket, endpoints](auto handler) {
    auto slot = asio::get_associated_cancellation_slot(handler);
    asio::async_connect(*socket, *endpoints,
                        asio::bind_cancellation_slot(slot, [socket, endpoints, h = std::move(handler)](
                                                               error_code ec, const tcp::endpoint&) mutable {
                          std::move(h)(ec, std::size_t{0});
                        }));
  };
  const IoOutcome connected = co_await withDeadline(clock, deadline, start);
  if (connected.timedOut) {
    co_return Opened(fail(ErrorCode::timeout, "no connection in time", name,
                          "check that the device is on, its address, and the network between"));
  }
  if (connected.error) {
    co_return Opened(fail(ErrorCode::io, "cannot connect: " + connected.error.message(), name,
                          "check that the device is on and listens on this port"));
  }
  error_code ignored;
  socket->set_option(tcp::no_delay(true), ignored);
  co_return Opened(std::make_unique<AsioStream<tcp::socket>>(clock, name, std::move(*socket)));
}

}  // namespace shuntwright::transport
