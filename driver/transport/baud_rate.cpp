#include "driver/transport/baud_rate.h"

// The kernel's termios2 cannot be had together with the C library's <termios.h>, hence a file of its own.
#include <asm/termbits.h>
#include <sys/ioctl.h>
#include <cerrno>

namespace shuntwright::transport {

std::error_code setBaudRate(int descriptor, int baud) {
  struct termios2 settings {};
  if (ioctl(descriptor, TCGETS2, &settings) != 0) return {errno, std::generic_category()};
  settings.c_cflag &= ~static_cast<tcflag_t>(CBAUD | (CBAUD << IBSHIFT));
  settings.c_cflag |= BOTHER | (BOTHER << IBSHIFT);
  settings.c_ispeed = static_cast<speed_t>(baud);
  settings.c_ospeed = static_cast<speed_t>(baud);
  if (ioctl(descriptor, TCSETS2, &settings) != 0) return {errno, std::generic_category()};
  return {};
}

std::optional<int> baudRate(int descriptor) {
  struct termios2 settings {};
  if (ioctl(descriptor, TCGETS2, &settings) != 0) return std::nullopt;
  return static_cast<int>(settings.c_ospeed);
}

}  // namespace shuntwright::transport
