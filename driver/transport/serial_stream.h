#pragma once

#include <string>

#include "driver/description/profile.h"
#include "driver/transport/stream.h"

namespace shuntwright::transport {

/// Opens a serial port (or a pty) in raw mode with the profile's settings, any baud rate; what had come
/// before is thrown away. Errors: io, naming the port and the setting that was refused.
Task<Result<std::unique_ptr<Stream>>> openSerial(Clock& clock, std::string path,
                                                 description::SerialSettings settings);

}  // namespace shuntwright::transport
