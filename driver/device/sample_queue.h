#pragma once

#include <cstddef>
#include <cstdint>
#include <deque>
#include <span>

#include "driver/device/sample_block.h"

namespace shuntwright::device {

/// Samples between the reader and whoever takes them: bounded, the oldest go first and are counted as lost.
///
/// take() gives everything up to the next gap, so that lost and damaged frames always stand before a block.
/// Filling does not allocate once a block has its room. No waiting, no clock: one thread.
class SampleQueue {
 public:
  /// @param limit  frames to keep at most
  SampleQueue(std::size_t inputs, std::size_t limit);

  std::size_t inputs() const { return inputs_; }
  bool empty() const { return frames_ == 0; }
  std::size_t frames() const { return frames_; }

  /// Adds to the gap before the next frame.
  void noteLost(std::uint64_t frames) { lost_ += frames; }
  void noteDamaged(std::uint64_t lines) { damaged_ += lines; }

  /// Adds one frame; both spans have `inputs()` values. A time that does not come after the one before is
  /// moved 1 ns behind it.
  void push(Instant when, std::span<const float> ratio, std::span<const std::uint8_t> flags);

  /// Sets the times of the last `count` frames, which arrived in one piece, a period apart and ending at the
  /// arrival, as far as the frames before them leave room.
  void spread(std::size_t count, Instant arrival, Nanoseconds period);

  /// With no frame left, a block without frames that tells the gap at the end.
  SampleBlock take();
  void clear();

 private:
  void startBlock();
  void dropOldest();

  std::size_t inputs_;
  std::size_t limit_;
  std::size_t chunk_;  ///< frames a block of the queue holds at most
  std::size_t frames_ = 0;
  std::uint64_t lost_ = 0;
  std::uint64_t damaged_ = 0;
  Instant last_ = Instant::min();
  std::deque<SampleBlock> blocks_;
};

}  // namespace shuntwright::device
