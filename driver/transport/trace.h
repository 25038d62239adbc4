#pragma once

#include <map>
#include <string>
#include <string_view>
#include <vector>

#include "driver/core/bytes.h"
#include "driver/core/clock.h"
#include "driver/core/error.h"

namespace shuntwright::transport {

/// What went over the wires of a rack, as a text file that a person can read and `replay:` can play.
///
///     shuntwright trace 1
///     start 1777887000000000000 2026-05-04T09:30:00.000Z
///     +0.000000000 amp1 open
///     +0.000000000 amp1 > "ID?\r\n"
///     +0.002000000 amp1 < "ID POLL16,P16-0001,1.0*5A\r\n"
///     +9.500000000 amp1 ! "the other end closed the connection"
///     +9.500000000 amp1 close
///     # a comment
///
/// `start` is the UTC time of the first event in nanoseconds since 1970, and again for people. A line is the
/// time since then in seconds, the device, and what happened: `>` written by the driver, `<` sent by the
/// device,
/// `!` the connection failed. Texts are in quotes with the escapes \r \n \t \" \\ and \xHH.
struct TraceEvent {
  enum class Kind { open, write, read, failure, close };
  Kind kind = Kind::open;
  Nanoseconds offset{0};  ///< since Trace::start
  std::string device;
  Bytes bytes;   ///< of a failure: its message
  int line = 0;  ///< in the file, from 1
};

struct Trace {
  Instant start{};
  std::vector<TraceEvent> events;
};

std::string traceHeader(Instant start);
/// One line with its newline. `kind` other than open and close has bytes.
std::string traceLine(TraceEvent::Kind kind, Nanoseconds offset, std::string_view device, ByteView bytes);

/// Errors: bad_file with file:line and what was expected there.
Result<Trace> parseTrace(std::string_view text, const std::string& file);
/// Errors besides: io when the file cannot be read.
Result<Trace> loadTrace(const std::string& file);

}  // namespace shuntwright::transport
