#include "sim/relays/relay_board.h"

#include <gtest/gtest.h>

namespace shuntwright::sim {
namespace {

class RelayBoardTest : public ::testing::Test {
 protected:
  RelayBoardTest() {
    described_.count = 4;
    described_.operateTime = std::chrono::milliseconds(8);
    described_.releaseTime = std::chrono::milliseconds(5);
  }
  RelayBoard board(std::uint64_t seed = 1) {
    return RelayBoard(described_, Random(seed), [this](int, bool, Instant when) {
      ++contacts_;
      last_ = when;
    });
  }
  description::Relays described_;
  const Instant now_ = VirtualClock::kDefaultStart;
  int contacts_ = 0;
  Instant last_;
};

TEST_F(RelayBoardTest, aContactClosesWithinItsOperateTimeAndMayBounce) {
  bool bounced = false;
  for (std::uint64_t seed = 1; seed < 40; ++seed) {
    contacts_ = 0;
    auto b = board(seed);
    b.command(2, true, now_);
    EXPECT_FALSE(b.closed(2)) << "not at once";
    b.advance(now_ + described_.operateTime);
    EXPECT_TRUE(b.closed(2));
    EXPECT_LE(last_, now_ + described_.operateTime);
    bounced = bounced || contacts_ > 1;
    b.command(2, false, now_ + std::chrono::seconds(1));
    b.advance(now_ + std::chrono::seconds(1) + described_.releaseTime);
    EXPECT_FALSE(b.closed(2));
  }
  EXPECT_TRUE(bounced);
}

TEST_F(RelayBoardTest, deadOnesNeverCloseAndWeldedOnesNeverOpen) {
  auto b = board();
  b.setDead(1);
  b.setWelded(3);
  for (const int relay : {1, 3}) b.command(relay, true, now_);
  b.advance(now_ + std::chrono::seconds(1));
  EXPECT_FALSE(b.closed(1));
  EXPECT_TRUE(b.closed(3));
  b.command(3, false, now_ + std::chrono::seconds(1));
  b.advance(now_ + std::chrono::seconds(2));
  EXPECT_TRUE(b.closed(3));
  EXPECT_EQ(b.next(), Instant::max());
}

}  // namespace
}  // namespace shuntwright::sim
