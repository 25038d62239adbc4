#include "driver/protocol/frame_counter.h"

#include <gtest/gtest.h>

namespace shuntwright::protocol {
namespace {

TEST(FrameCounter, CountsTheMissingOnes) {
  FrameCounter counter(16);
  EXPECT_EQ(counter.next(1000), 0u) << "nothing is known before the first";
  EXPECT_EQ(counter.next(1001), 0u);
  EXPECT_EQ(counter.next(1005), 3u);
}

TEST(FrameCounter, WrapsAtItsWidth) {
  for (const int bits : {1, 2, 8, 16, 31, 32}) {
    FrameCounter counter(bits);
    const std::uint64_t last = (std::uint64_t{1} << bits) - 1;
    counter.next(last);
    EXPECT_EQ(counter.next(0), 0u) << bits;
    EXPECT_EQ(counter.restarts(), 0u);
  }
  FrameCounter counter(8);
  counter.next(254);
  EXPECT_EQ(counter.next(1), 2u);
}

TEST(FrameCounter, EveryStepUpToHalfTheRangeIsALossAndEveryLongerOneARestart) {
  for (unsigned step = 0; step < 256; ++step) {
    FrameCounter counter(8);
    counter.next(200);
    const bool lossy = step >= 1 && step <= 128;
    EXPECT_EQ(counter.next((200 + step) & 0xFF), lossy ? step - 1 : 0) << step;
    EXPECT_EQ(counter.restarts(), lossy ? 0u : 1u) << step;
  }
}

TEST(FrameCounter, WithoutWidthSaysNothing) {
  FrameCounter counter;
  counter.next(1);
  EXPECT_EQ(counter.next(100), 0u);
}

}  // namespace
}  // namespace shuntwright::protocol
