#pragma once

#include <cstdint>
#include <memory>

#include "driver/transport/stream.h"

namespace shuntwright::transport {

/// Counts the operations (open, read, write) of all streams that share it and makes one fail.
struct FailPoint {
  enum class Kind { once, from_then_on };
  std::uint64_t failAt = 0;  ///< number of the operation that fails, from 1; 0: none
  Kind kind = Kind::once;
  ErrorCode code = ErrorCode::io;
  std::uint64_t count = 0;  ///< operations so far

  /// Counts one operation and says whether it is to fail.
  bool fails();
};

/// Decorators for tests: loop `failAt` from 1 until a run passes with `count < failAt`.
std::unique_ptr<Stream> failingStream(std::unique_ptr<Stream> inner, std::shared_ptr<FailPoint> point);
Opener failingOpener(Opener inner, std::shared_ptr<FailPoint> point);

}  // namespace shuntwright::transport
