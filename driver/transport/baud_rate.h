#pragma once

#include <system_error>

namespace shuntwright::transport {

/// Sets any rate, the non-standard ones included, through termios2. Linux only.
/// @param descriptor  an open serial port
std::error_code setBaudRate(int descriptor, int baud);

}  // namespace shuntwright::transport
