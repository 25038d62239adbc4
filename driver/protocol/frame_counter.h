#pragma once

#include <cstdint>

namespace shuntwright::protocol {

/// Follows the running number that a device puts into each frame and says how many frames are missing.
///
/// The number has `bits` bits and wraps to 0. A step of more than half its range, or none at all, is taken
/// for a restart of the device: nothing can then be said about missing frames.
class FrameCounter {
 public:
  explicit FrameCounter(int bits = 0) : bits_(bits) {}

  /// @returns frames missing between the one before and this one.
  std::uint64_t next(std::uint64_t value) {
    if (bits_ <= 0) return 0;
    const std::uint64_t mask = bits_ >= 64 ? ~std::uint64_t{0} : (std::uint64_t{1} << bits_) - 1;
    const std::uint64_t step = (value - last_) & mask;
    const bool first = !started_;
    started_ = true;
    last_ = value & mask;
    if (first) return 0;
    if (step == 0 || step > mask / 2 + 1) {
      ++restarts_;
      return 0;
    }
    return step - 1;
  }

  /// The next number is the first.
  void reset() { started_ = false; }
  std::uint64_t restarts() const { return restarts_; }

 private:
  int bits_;
  bool started_ = false;
  std::uint64_t last_ = 0;
  std::uint64_t restarts_ = 0;
};

}  // namespace shuntwright::protocol
