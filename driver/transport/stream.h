#pragma once

#include <cstddef>
#include <functional>
#include <memory>
#include <span>
#include <string>

#include "driver/core/bytes.h"
#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/core/task.h"
#include "driver/description/rack.h"

namespace shuntwright::transport {

/// A two-way stream of bytes to one device. One read and one write may be pending at a time.
class Stream {
 public:
  virtual ~Stream() = default;

  /// Reads at least one byte. Errors: timeout at the deadline, io when the other end is gone.
  virtual Task<Result<std::size_t>> read(std::span<std::byte> into, Instant deadline) = 0;
  /// Writes all of it. Errors: timeout, io.
  virtual Task<Result<void>> write(ByteView bytes, Instant deadline) = 0;
  /// Ends pending reads and writes with an io error. May be called twice.
  virtual void close() = 0;
  /// "tcp:127.0.0.1:5025", for messages.
  virtual std::string name() const = 0;
};

/// Opens the stream of a device of the rack. The driver cannot tell a simulated device from a real one: the
/// opener is all that differs.
using Opener = std::function<Task<Result<std::unique_ptr<Stream>>>(const description::Device& device)>;

}  // namespace shuntwright::transport
