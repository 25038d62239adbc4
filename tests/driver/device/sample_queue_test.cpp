#include "driver/device/sample_queue.h"

#include <gtest/gtest.h>
#include <vector>

namespace shuntwright::device {
namespace {

using namespace std::chrono_literals;

class SampleQueueTest : public ::testing::Test {
 protected:
  SampleQueue queue{2, 100};
  const Instant start{std::chrono::seconds(1000)};
  int pushed = 0;

  void push(int count = 1) {
    for (int k = 0; k < count; ++k, ++pushed) {
      const std::vector<float> ratio{static_cast<float>(pushed), static_cast<float>(-pushed)};
      const std::vector<std::uint8_t> flags{0, kMissing};
      queue.push(start + pushed * 10ms, ratio, flags);
    }
  }
};

TEST_F(SampleQueueTest, GivesFramesAsTheyWereFilledIn) {
  push(3);
  const auto block = queue.take();
  ASSERT_EQ(block.frames(), 3u);
  EXPECT_EQ(block.inputs, 2u);
  EXPECT_EQ(block.at(2, 1), -2.0f);
  EXPECT_EQ(block.flagsAt(2, 1), kMissing);
  EXPECT_EQ(block.time[2], start + 20ms);
  EXPECT_TRUE(queue.empty());
  EXPECT_EQ(queue.take().frames(), 0u);
}

TEST_F(SampleQueueTest, AGapStandsBeforeABlock) {
  push(2);
  queue.noteLost(3);
  queue.noteDamaged(1);
  push(2);
  const auto before = queue.take();
  EXPECT_EQ(before.frames(), 2u);
  EXPECT_EQ(before.lostBefore, 0u);
  const auto after = queue.take();
  EXPECT_EQ(after.frames(), 2u);
  EXPECT_EQ(after.lostBefore, 3u);
  EXPECT_EQ(after.damagedBefore, 1u);
}

TEST_F(SampleQueueTest, AGapAtTheEndIsToldWithoutFrames) {
  push(2);
  queue.noteLost(3);
  queue.noteDamaged(1);
  EXPECT_EQ(queue.take().frames(), 2u);
  const auto end = queue.take();
  EXPECT_EQ(end.frames(), 0u);
  EXPECT_EQ(end.lostBefore, 3u);
  EXPECT_EQ(end.damagedBefore, 1u);
  EXPECT_EQ(queue.take().lostBefore, 0u) << "once";
}

TEST_F(SampleQueueTest, WithoutGapAllComesAtOnceHoweverLong) {
  push(95);  // more than one piece of the queue's own
  EXPECT_EQ(queue.take().frames(), 95u);
}

TEST_F(SampleQueueTest, DropsTheOldestAndCountsThem) {
  queue.noteDamaged(2);
  push(1000);
  EXPECT_LE(queue.frames(), 100u);
  EXPECT_GE(queue.frames(), 90u);
  const auto block = queue.take();
  EXPECT_EQ(block.lostBefore + block.frames(), 1000u);
  EXPECT_EQ(block.damagedBefore, 2u);
  EXPECT_EQ(block.at(block.frames() - 1, 0), 999.0f);
}

TEST_F(SampleQueueTest, KeepsGapsWhenItDrops) {
  push(50);
  queue.noteLost(7);
  push(200);
  std::uint64_t frames = 0, lost = 0;
  while (!queue.empty()) {
    const auto block = queue.take();
    frames += block.frames();
    lost += block.lostBefore;
  }
  EXPECT_EQ(frames + lost, 257u);
}

TEST_F(SampleQueueTest, SpreadsAPieceOverItsPeriods) {
  push(1);
  for (int k = 0; k < 3; ++k)
    queue.push(start + 100ms, std::vector<float>{1, 2}, std::vector<std::uint8_t>{0, 0});
  queue.spread(3, start + 100ms, 10ms);
  const auto block = queue.take();
  EXPECT_EQ(block.time, (std::vector<Instant>{start, start + 80ms, start + 90ms, start + 100ms}));
}

TEST_F(SampleQueueTest, SpreadingNeverGoesBehindWhatStoodBefore) {
  push(1);
  for (int k = 0; k < 3; ++k)
    queue.push(start + 5ms, std::vector<float>{1, 2}, std::vector<std::uint8_t>{0, 0});
  queue.spread(3, start + 5ms, 10ms);
  const auto block = queue.take();
  EXPECT_EQ(block.time, (std::vector<Instant>{start, start + 1ns, start + 2ns, start + 5ms}));
}

}  // namespace
}  // namespace shuntwright::device
