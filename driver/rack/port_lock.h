#pragma once

#include <string>
#include <utility>

#include "driver/core/error.h"
#include "driver/description/rack.h"

namespace shuntwright::rack {

/// Exclusive use of a port among all programs of this machine: a file in a common folder, held with flock
/// (2). The kernel lets go of it when the process ends, however it ends. Replayed ports need none.
class PortLock {
 public:
  /// Errors: refused when another process holds it (its number is named); io when the file cannot be made.
  static Result<PortLock> take(const std::string& folder, const description::Port& port);

  PortLock(PortLock&& other) noexcept : descriptor_(std::exchange(other.descriptor_, -1)) {}
  PortLock& operator=(PortLock&& other) noexcept;
  ~PortLock();

 private:
  explicit PortLock(int descriptor) : descriptor_(descriptor) {}
  int descriptor_ = -1;
};

/// The file's name for a port. Two names of one serial node (symlinks) give one lock.
std::string lockName(const description::Port& port);

}  // namespace shuntwright::rack
