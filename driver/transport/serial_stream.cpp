#include "driver/transport/serial_stream.h"

#include <termios.h>
#include <boost/asio/serial_port.hpp>
#include <boost/asio/this_coro.hpp>

#include "driver/transport/asio_stream.h"
#include "driver/transport/baud_rate.h"

namespace shuntwright::transport {

namespace asio = boost::asio;
using boost::system::error_code;
using description::SerialSettings;

namespace {

std::string remedyFor(const error_code& ec) {
  if (ec == boost::system::errc::permission_denied) {
    return "give yourself access to the port: on Debian, add your user to the group dialout and log in again";
  }
  if (ec == boost::system::errc::no_such_file_or_directory) {
    return "check that the adapter is plugged in: ls /dev/serial/by-id";
  }
  if (ec == boost::system::errc::device_or_resource_busy) return "another program has the port open";
  return {};
}

Result<void> configure(asio::serial_port& port, const SerialSettings& settings, const std::string& name) {
  using Base = asio::serial_port_base;
  error_code ec;
  const auto refused = [&](const std::string& what) {
    return fail(ErrorCode::io, "the port refuses " + what + ": " + ec.message(), name,
                "check [reach.serial] of the profile against what the port can do");
  };
  port.set_option(Base::character_size(static_cast<unsigned>(settings.dataBits)), ec);
  if (ec) return refused(std::to_string(settings.dataBits) + " data bits");
  port.set_option(Base::stop_bits(settings.stopBits == 2 ? Base::stop_bits::two : Base::stop_bits::one), ec);
  if (ec) return refused(std::to_string(settings.stopBits) + " stop bits");
  const auto parity = settings.parity == SerialSettings::Parity::even  ? Base::parity::even
                      : settings.parity == SerialSettings::Parity::odd ? Base::parity::odd
                                                                       : Base::parity::none;
  port.set_option(Base::parity(parity), ec);
  if (ec) return refused("the parity");
  const auto flow = settings.flow == SerialSettings::Flow::hardware   ? Base::flow_control::hardware
                    : settings.flow == SerialSettings::Flow::software ? Base::flow_control::software
                                                                      : Base::flow_control::none;
  port.set_option(Base::flow_control(flow), ec);
  if (ec) return refused("the flow control");
  // Last: the options above rewrite the whole settings, and would not keep an unusual rate.
  port.set_option(Base::baud_rate(static_cast<unsigned>(settings.baud)), ec);
  if (ec) {
    if (const auto failed = setBaudRate(port.native_handle(), settings.baud)) {
      ec = error_code(failed.value(), boost::system::generic_category());
      return refused(std::to_string(settings.baud) + " Bd");
    }
  }
  return {};
}

}  // namespace

Task<Result<std::unique_ptr<Stream>>> openSerial(Clock& clock, std::string path, SerialSettings settings) {
  using Opened = Result<std::unique_ptr<Stream>>;
  auto executor = co_await asio::this_coro::executor;
  const std::string name = "serial:" + path;
  asio::serial_port port(executor);
  error_code ec;
  port.open(path, ec);
  if (ec) {
    co_return Opened(fail(ErrorCode::io, "cannot open the port: " + ec.message(), name, remedyFor(ec)));
  }
  if (auto done = configure(port, settings, name); !done) {
    co_return Opened(std::unexpected(std::move(done.error())));
  }
  tcflush(port.native_handle(), TCIFLUSH);
  co_return Opened(std::make_unique<AsioStream<asio::serial_port>>(clock, name, std::move(port)));
}

}  // namespace shuntwright::transport
