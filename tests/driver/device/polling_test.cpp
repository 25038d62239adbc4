// proves P-05
#include <cmath>

#include "scripted_device.h"

namespace shuntwright::test {
namespace {

constexpr const char* kAmplifier = R"(
[text]
request_end = "\r\n"
answer_end = "\r\n"
checksum = { kind = "xor8", separator = "*" }
timeout = "50 ms"
retries = 1
[inputs]
count = 3
gives = "mV/V"
saturated = ["OVR"]
missing = ["NC"]
full_scale = "4 mV/V"
completions = [{ value = "120 ohm", tolerance = "0.1 %" }]
excitations = ["5 V"]
rates = ["10 Hz", "100 Hz"]
read = { ask = "RD {first:02} {last:02}", answer = "RD {values:,}" }
)";

/// Worked out here, not by the driver: exclusive or of all characters, as two hexadecimal digits.
std::string withSum(const std::string& text) {
  unsigned sum = 0;
  for (const char c : text) sum ^= static_cast<unsigned char>(c);
  char digits[8];
  std::snprintf(digits, sizeof digits, "*%02X", sum);
  return text + digits + "\r\n";
}

class PolledAmplifier : public DeviceTest {
 protected:
  void SetUp() override {
    profile(kAmplifier);
    wire.requestEnd = "\r\n";
    wire.answer = [](const std::string&) { return std::vector<Piece>{{4ms, withSum("RD 0.5,-1.25,2")}}; };
    open();
  }
};

TEST_F(PolledAmplifier, AsksForAllInputsWithACheckSum) {
  ASSERT_TRUE(start(10));
  ASSERT_TRUE(next());
  EXPECT_EQ(wire.requests.front() + "\r\n", withSum("RD 01 03"));
}

TEST_F(PolledAmplifier, GivesRatiosTimedHalfWayBetweenRequestAndAnswer) {
  ASSERT_TRUE(start(10));
  const auto block = next();
  ASSERT_TRUE(block) << block.error().text();
  ASSERT_EQ(block->frames(), 1u);
  ASSERT_EQ(block->inputs, 3u);
  EXPECT_EQ(since(block->time[0]), 2ms);
  EXPECT_FLOAT_EQ(block->at(0, 0), 0.5e-3f);
  EXPECT_FLOAT_EQ(block->at(0, 1), -1.25e-3f);
  EXPECT_FLOAT_EQ(block->at(0, 2), 2e-3f);
  EXPECT_EQ(block->flagsAt(0, 0), 0);
}

TEST_F(PolledAmplifier, PollsAtExactTicksWithoutDrift) {
  ASSERT_TRUE(start(30));  // a period that is no whole number of nanoseconds
  pass(10s + 1ms);
  ASSERT_TRUE(stop());
  ASSERT_EQ(wire.requestTimes.size(), 301u);
  for (std::size_t k = 0; k < wire.requestTimes.size(); ++k) {
    const double tick_s = static_cast<double>(k) / 30;
    EXPECT_NEAR(seconds(since(wire.requestTimes[k])), tick_s, 1e-9) << k;
  }
}

TEST_F(PolledAmplifier, SkippedTicksOfASlowDeviceAreCountedAsLost) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{25ms, withSum("RD 1,1,1")}}; };
  ASSERT_TRUE(start(100));  // asked at 0, 30, 60 ms...: two of three ticks pass meanwhile
  pass(1s);
  std::uint64_t frames = 0, lost = 0;
  while (frames + lost < 90) {
    const auto block = next();
    ASSERT_TRUE(block);
    frames += block->frames();
    lost += block->lostBefore;
    EXPECT_EQ(block->frames(), 1u);
  }
  EXPECT_EQ(lost, 2 * (frames - 1));
}

TEST_F(PolledAmplifier, WordsBecomeFlags) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, withSum("RD OVR,NC,-4.0")}}; };
  ASSERT_TRUE(start(10));
  const auto block = next();
  ASSERT_TRUE(block) << block.error().text();
  EXPECT_EQ(block->flagsAt(0, 0), device::kSaturated);
  EXPECT_TRUE(std::isnan(block->at(0, 0)));
  EXPECT_EQ(block->flagsAt(0, 1), device::kMissing);
  EXPECT_TRUE(std::isnan(block->at(0, 1)));
  EXPECT_EQ(block->flagsAt(0, 2), device::kSaturated) << "full scale is reached";
}

TEST_F(PolledAmplifier, ADamagedAnswerIsAskedForAgainAtOnce) {
  int asked = 0;
  wire.answer = [&](const std::string&) {
    std::string line = withSum("RD 1,1,1");
    if (asked++ == 0) line[3] = '7';
    return std::vector<Piece>{{1ms, line}};
  };
  ASSERT_TRUE(start(10));
  const auto block = next();
  ASSERT_TRUE(block) << block.error().text();
  EXPECT_EQ(asked, 2);
  EXPECT_EQ(since(clock.now()), 2ms);
}

TEST_F(PolledAmplifier, AWrongCheckSumEveryTimeIsABadAnswerThatNamesBothSums) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, "RD 1,1,1*00\r\n"}}; };
  ASSERT_TRUE(start(10));
  const auto block = next();
  ASSERT_FALSE(block);
  EXPECT_EQ(block.error().code, ErrorCode::bad_answer);
  const std::string text = block.error().text();
  EXPECT_NE(text.find("wrong check sum in \"RD 1,1,1*00\": expected 07"), std::string::npos) << text;
  EXPECT_NE(text.find("request \"RD 01 03\""), std::string::npos) << text;
}

TEST_F(PolledAmplifier, TooFewValuesAreABadAnswer) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, withSum("RD 1,1")}}; };
  ASSERT_TRUE(start(10));
  const auto block = next();
  ASSERT_FALSE(block);
  EXPECT_EQ(block.error().code, ErrorCode::bad_answer);
  EXPECT_NE(block.error().text().find("expected 3 values, got 2"), std::string::npos) << block.error().text();
}

TEST_F(PolledAmplifier, AFailedReadingIsToldOnceAndPollingGoesOn) {
  int asked = 0;
  wire.answer = [&](const std::string&) {
    ++asked;
    return asked == 2 || asked == 3 ? std::vector<Piece>{} : std::vector<Piece>{{1ms, withSum("RD 1,1,1")}};
  };
  ASSERT_TRUE(start(10));
  ASSERT_TRUE(next());
  const auto failed = next();
  ASSERT_FALSE(failed);
  EXPECT_EQ(failed.error().code, ErrorCode::timeout);
  const auto again = next();
  ASSERT_TRUE(again) << again.error().text();
  EXPECT_GE(again->lostBefore, 1u);
}

TEST_F(PolledAmplifier, StopEndsThePolling) {
  ASSERT_TRUE(start(100));
  pass(95ms);
  ASSERT_TRUE(stop());
  const std::size_t asked = wire.requests.size();
  pass(1s);
  EXPECT_EQ(wire.requests.size(), asked);
  EXPECT_TRUE(next()) << "what was queued can still be taken";
  EXPECT_EQ(next().error().code, ErrorCode::bad_use);
}

TEST_F(PolledAmplifier, StopAwaitsAReadingThatIsUnderWay) {
  ASSERT_TRUE(start(100));
  pass(2ms);  // the answer is due at 4 ms
  ASSERT_TRUE(stop());
  EXPECT_EQ(since(clock.now()), 4ms);
}

TEST_F(PolledAmplifier, KeepsTenSecondsAndCountsWhatItDrops) {
  ASSERT_TRUE(start(100));
  pass(25s);
  const auto block = next();
  ASSERT_TRUE(block);
  EXPECT_LE(block->frames(), 1000u);
  EXPECT_GE(block->frames(), 900u);
  EXPECT_EQ(block->frames() + block->lostBefore, wire.requests.size());
  EXPECT_NEAR(seconds(since(block->time.back())), 25, 0.02) << "the newest are kept";
}

TEST_F(PolledAmplifier, NextTimesOutAtItsDeadline) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{}; };
  ASSERT_TRUE(start(10));
  const auto block = next(20ms);
  ASSERT_FALSE(block);
  EXPECT_EQ(block.error().code, ErrorCode::timeout);
  EXPECT_EQ(since(clock.now()), 20ms);
}

TEST_F(PolledAmplifier, MayBeDestroyedWhileItPolls) {
  ASSERT_TRUE(start(100));
  pass(2ms);
  device.reset();
  pass(1s);
  EXPECT_LE(wire.requests.size(), 2u);
}

}  // namespace
}  // namespace shuntwright::test
