#pragma once

#include <optional>
#include <system_error>

namespace shuntwright::transport {

/// Sets any rate, the non-standard ones included, through termios2. Linux only.
/// @param descriptor  an open serial port
std::error_code setBaudRate(int descriptor, int baud);

/// The rate at which the port sends, standard or not.
std::optional<int> baudRate(int descriptor);

}  // namespace shuntwright::transport
