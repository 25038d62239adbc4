#pragma once

#include <boost/asio/io_context.hpp>
#include <memory>
#include <string>
#include <vector>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/core/task.h"
#include "driver/description/rack.h"
#include "sim/amplifier/bench.h"

namespace shuntwright::simhost {

/// Where a simulated device can be reached.
struct Served {
  std::string device;
  std::string port;  ///< as a rack names it: "tcp:127.0.0.1:47001", "serial:/tmp/x/amp1"
};

/// Serves devices on the ports that real ones would have. One client at a time; when it goes, the device waits for
/// the next and keeps its relays. Stops with the io_context.
class Hosting {
 public:
  Hosting(boost::asio::io_context& context, sim::Bench& bench, Clock& clock);
  ~Hosting();

  /// Listens on a TCP port of the loopback interface; 0 takes a free one. Errors: io.
  Result<Served> onTcp(const std::string& device, int port);
  /// Makes a pseudo terminal and, at `link`, a symbolic link to it; the link goes when this goes. Errors: io, also
  /// when anything but an earlier simulator's link stands there.
  Result<Served> onPty(const std::string& device, const std::string& link);

 private:
  struct State;
  static Task<void> servePty(std::shared_ptr<State> state, std::string device, std::string link);
  std::shared_ptr<State> state_;
};

}  // namespace shuntwright::simhost
