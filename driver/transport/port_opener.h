#pragma once

#include "driver/transport/stream.h"

namespace shuntwright::transport {

/// Opens what the rack's ports name: serial ports, TCP, and traces to be replayed. A TCP port that is not
/// given in the rack is the profile's. The clock must outlive the streams.
/// @param connectLimit  for a TCP connection to come about
Opener portOpener(Clock& clock, Nanoseconds connectLimit = std::chrono::seconds(5));

}  // namespace shuntwright::transport
