#pragma once

#include <string>

#include "driver/transport/stream.h"
#include "driver/transport/trace.h"

namespace shuntwright::transport {

/// Plays a trace in place of the devices: each opening of a device plays its next session.
///
/// What a device sent comes when everything that the driver had written before it has been written again, and
/// as long after the event before it as it did then, on `clock`. In virtual time a run thus sees the very
/// same bytes at the same times as when it was traced in virtual time. A write that differs from the traced
/// one is an error that names the line of the trace; after the end of the trace nothing comes any more. The
/// clock must outlive the streams. Errors of the first form: what loadTrace() says.
Opener replayOpener(Trace trace, std::string file, Clock& clock);
Result<Opener> replayOpener(const std::string& traceFile, Clock& clock);

}  // namespace shuntwright::transport
