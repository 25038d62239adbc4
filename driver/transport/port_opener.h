#pragma once

#include <optional>

#include "driver/transport/stream.h"

namespace shuntwright::transport {

/// Opens what the rack's ports name: serial ports, TCP, and traces to be replayed. A TCP port that is not
/// given in the rack is the profile's. The clock must outlive the streams.
/// @param connectLimit  for a TCP connection to come about
Opener portOpener(Clock& clock, Nanoseconds connectLimit = std::chrono::seconds(5));

/// When every device of the rack is at a `replay:` port: the start of the earliest of their traces, at which a virtual
/// clock for them begins. Nothing when one is not (real devices run in real time). Errors: loadTrace()'s.
Result<std::optional<Instant>> replayStart(const description::Rack& rack);

}  // namespace shuntwright::transport
