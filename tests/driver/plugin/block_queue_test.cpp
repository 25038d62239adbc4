#include "driver/plugin/block_queue.h"

#include <gtest/gtest.h>

namespace shuntwright::plugin {
namespace {

using namespace std::chrono_literals;

std::unique_ptr<Block> block(const std::string& device, std::size_t frames, std::uint64_t lost = 0) {
  auto out = std::make_unique<Block>();
  out->device = device;
  out->samples.inputs = 1;
  out->samples.time.resize(frames);
  out->samples.ratio.resize(frames);
  out->samples.flags.resize(frames);
  out->lost = lost;
  return out;
}

TEST(BlockQueue, givesBlocksInTheOrderOfTheirComing) {
  BlockQueue queue;
  queue.push(block("a", 3), 100);
  queue.push(block("b", 4), 100);
  EXPECT_EQ((*queue.take(0ms))->device, "a");
  EXPECT_EQ((*queue.take(0ms))->device, "b");
  EXPECT_EQ(queue.take(0ms).error().code, ErrorCode::timeout);
}

TEST(BlockQueue, whatNobodyReadsIsDroppedOldestFirstAndCountedInTheNext) {
  BlockQueue queue;
  queue.push(block("a", 6, 2), 10);
  queue.push(block("b", 50), 50);
  queue.push(block("a", 6), 10);  // 12 frames of a: the first block goes
  EXPECT_EQ((*queue.take(0ms))->device, "b") << "another device's samples stay";
  auto kept = queue.take(0ms);
  ASSERT_TRUE(kept.has_value());
  EXPECT_EQ((*kept)->lost, 8u) << "6 frames and the 2 that were lost before them";
}

TEST(BlockQueue, damagedLinesOfDroppedBlocksAreCountedToo) {
  BlockQueue queue;
  auto first = block("a", 6);
  first->damaged = 3;
  queue.push(std::move(first), 10);
  queue.push(block("a", 6), 10);
  auto kept = queue.take(0ms);
  ASSERT_TRUE(kept.has_value());
  EXPECT_EQ((*kept)->damaged, 3u);
}

TEST(BlockQueue, whenAllIsDroppedTheNextBlockTellsIt) {
  BlockQueue queue;
  queue.push(block("a", 20), 10);
  EXPECT_FALSE(queue.take(0ms).has_value());
  queue.push(block("a", 5), 10);
  EXPECT_EQ((*queue.take(0ms))->lost, 20u);
}

TEST(BlockQueue, theEndIsToldAfterTheLastBlock) {
  BlockQueue queue;
  queue.push(block("a", 1), 10);
  queue.end(Error(ErrorCode::io, "unplugged"));
  EXPECT_TRUE(queue.take(0ms).has_value());
  EXPECT_EQ(queue.take(0ms).error().message, "unplugged");
  queue.clear();
  EXPECT_EQ(queue.take(0ms).error().code, ErrorCode::timeout);
}

TEST(BlockQueue, anAcquisitionThatTimedOutIsOverAndNotToBeTriedAgain) {
  BlockQueue queue;
  queue.end(Error(ErrorCode::timeout, "amp1 does not answer"));
  EXPECT_EQ(queue.take(0ms).error().code, ErrorCode::io);
}

TEST(BlockQueue, waitsForRoomOnlyWhenManyBlocksStandThere) {
  BlockQueue queue;
  for (int k = 0; k < 63; ++k) queue.push(block("a", 1), 1000);
  EXPECT_FALSE(queue.waitForRoom());
  queue.push(block("a", 1), 1000);
  EXPECT_TRUE(queue.waitForRoom());
}

}  // namespace
}  // namespace shuntwright::plugin
