#pragma once

#include <string>

#include "driver/transport/stream.h"

namespace shuntwright::transport {

/// Connects to host:port within `limit`; host is a name or an address of IPv4 or IPv6. Errors: io (not found,
/// refused, unreachable), timeout; each names the port and says what to look at.
Task<Result<std::unique_ptr<Stream>>> connectTcp(Clock& clock, std::string host, int port, Nanoseconds limit);

}  // namespace shuntwright::transport
