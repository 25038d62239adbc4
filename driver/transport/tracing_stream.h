#pragma once

#include <string>

#include "driver/transport/stream.h"

namespace shuntwright::transport {

/// Opens through `inner` and writes everything that goes over the wires of all devices to one trace file (see
/// trace.h), which is created anew. The times are the clock's; the clock must outlive the streams. Errors: io
/// when the file cannot be written.
Result<Opener> tracingOpener(Opener inner, const std::string& traceFile, Clock& clock);

}  // namespace shuntwright::transport
