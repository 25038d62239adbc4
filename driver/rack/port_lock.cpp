#include "driver/rack/port_lock.h"

#include <fcntl.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cctype>
#include <cerrno>
#include <cstdlib>
#include <cstring>
#include <memory>

namespace shuntwright::rack {

std::string lockName(const description::Port& port) {
  std::string text = port.text;
  if (port.kind == description::Port::Kind::serial) {
    if (const std::unique_ptr<char, void (*)(void*)> real(::realpath(port.path.c_str(), nullptr), ::free); real) {
      text = std::string("serial:") + real.get();
    }
  }
  for (char& c : text) {
    if (!std::isalnum(static_cast<unsigned char>(c)) && c != '.' && c != '-') c = '_';
  }
  return text + ".lock";
}

Result<PortLock> PortLock::take(const std::string& folder, const description::Port& port) {
  // Shared by all users of the machine, like a lock folder of the system.
  if (::mkdir(folder.c_str(), 01777) == 0) ::chmod(folder.c_str(), 01777);
  const std::string path = folder + "/" + lockName(port);
  const int descriptor = ::open(path.c_str(), O_RDWR | O_CREAT | O_CLOEXEC | O_NOFOLLOW, 0666);
  if (descriptor < 0) {
    return fail(ErrorCode::io, "cannot make the lock file: " + std::string(std::strerror(errno)), path,
                "make the folder writable, or name another one");
  }
  if (::flock(descriptor, LOCK_EX | LOCK_NB) != 0) {
    char holder[32] = {};
    const auto got = ::pread(descriptor, holder, sizeof holder - 1, 0);
    ::close(descriptor);
    const std::string who = got > 0 ? "process " + std::string(holder, std::strcspn(holder, "\n")) : "another process";
    return fail(ErrorCode::refused, "port " + port.text + " is in use by " + who, path,
                "end the other program first");
  }
  const std::string pid = std::to_string(::getpid()) + "\n";
  if (::ftruncate(descriptor, 0) != 0 || ::pwrite(descriptor, pid.data(), pid.size(), 0) < 0) {
    // The number is only a courtesy to whoever finds the port taken; the lock itself holds.
  }
  return PortLock(descriptor);
}

PortLock& PortLock::operator=(PortLock&& other) noexcept {
  if (this != &other) {
    if (descriptor_ >= 0) ::close(descriptor_);
    descriptor_ = std::exchange(other.descriptor_, -1);
  }
  return *this;
}

PortLock::~PortLock() {
  if (descriptor_ >= 0) ::close(descriptor_);
}

}  // namespace shuntwright::rack
