#include "scripted_device.h"

namespace shuntwright::test {
namespace {

constexpr const char* kAmplifier = R"(
[text]
request_end = "\n"
answer_end = "\n"
timeout = "50 ms"
retries = 1
[[error]]
pattern = "#NO {code}"
[inputs]
count = 2
gives = "uV/V"
full_scale = "5 mV/V"
completions = [{ value = "120 ohm", tolerance = "0.1 %" }]
excitations = ["5 V"]
rates = ["100 Hz"]
[inputs.stream]
start = { ask = "GO", answer = "#GO" }
stop = { ask = "HALT", answer = "#HALT" }
line = "@{counter:02X} {values:;}"
counter_bits = 8
[inputs.set_rate]
ask = "RATE {rate}"
answer = "#RATE {rate}"
[relays]
count = 2
close = { ask = "CLOSE {relay}", answer = "#CLOSE {relay}" }
open = { ask = "OPEN {relay}", answer = "#OPEN {relay}" }
)";

class StreamingAmplifier : public DeviceTest {
 protected:
  void SetUp() override {
    profile(kAmplifier);
    wire.answer = [](const std::string& request) { return std::vector<Piece>{{1ms, "#" + request + "\n"}}; };
    open();
  }

  std::string line(unsigned counter, double first_uV = 100, double second_uV = -200) {
    char out[64];
    std::snprintf(out, sizeof out, "@%02X %.2f;%.2f\n", counter & 0xFF, first_uV, second_uV);
    return out;
  }
};

TEST_F(StreamingAmplifier, SetsTheRateStartsAndGivesSamplesAsTheyArrive) {
  ASSERT_TRUE(start(100));
  EXPECT_EQ(wire.requests, (std::vector<std::string>{"RATE 100", "GO"}));
  wire.send(line(0, 1500.25, -200), 10ms);
  wire.send(line(1), 20ms);
  const Instant begin = clock.now();
  const auto one = next();
  ASSERT_TRUE(one) << one.error().text();
  EXPECT_EQ(one->time.at(0), begin + 10ms);
  EXPECT_FLOAT_EQ(one->at(0, 0), 1500.25e-6f);
  EXPECT_FLOAT_EQ(one->at(0, 1), -200e-6f);
  const auto two = next();
  ASSERT_TRUE(two);
  EXPECT_EQ(two->time.at(0), begin + 20ms);
  EXPECT_EQ(two->lostBefore, 0u);
}

TEST_F(StreamingAmplifier, ARestartOfTheCounterIsAGapAndNotPassedOver) {
  ASSERT_TRUE(start(100));
  wire.send(line(100) + line(101) + line(0) + line(1), 1ms);  // 0 is 101 back: no loss makes that
  const auto before = next();
  ASSERT_TRUE(before);
  EXPECT_EQ(before->frames(), 2u);
  const auto after = next();
  ASSERT_TRUE(after);
  EXPECT_EQ(after->frames(), 2u);
  EXPECT_EQ(after->damagedBefore, 1u);
}

TEST_F(StreamingAmplifier, LostLinesAreCountedAcrossTheWrapOfTheCounter) {
  ASSERT_TRUE(start(100));
  wire.send(line(253) + line(254) + line(1) + line(2) + line(5), 1ms);  // 255 and 0 are missing, then 3 and 4
  const auto before = next();
  ASSERT_TRUE(before);
  EXPECT_EQ(before->frames(), 2u);
  EXPECT_EQ(before->lostBefore, 0u);
  const auto after = next();
  ASSERT_TRUE(after);
  EXPECT_EQ(after->frames(), 2u);
  EXPECT_EQ(after->lostBefore, 2u);
  const auto last = next();
  ASSERT_TRUE(last);
  EXPECT_EQ(last->frames(), 1u);
  EXPECT_EQ(last->lostBefore, 2u);
}

TEST_F(StreamingAmplifier, ADamagedLineIsCountedAndTheStreamGoesOn) {
  ASSERT_TRUE(start(100));
  wire.send(line(0) + "@01 1.0;2.\xff\n" + line(2), 1ms);
  ASSERT_TRUE(next());
  const auto after = next();
  ASSERT_TRUE(after);
  EXPECT_EQ(after->damagedBefore, 1u);
  EXPECT_EQ(after->lostBefore, 1u);
}

TEST_F(StreamingAmplifier, LinesThatCameInOnePieceAreTimedAPeriodApart) {
  ASSERT_TRUE(start(100));
  pass(100ms);
  wire.send(line(0) + line(1) + line(2));
  const Instant arrival = clock.now();
  const auto block = next();
  ASSERT_TRUE(block);
  ASSERT_EQ(block->frames(), 3u);
  EXPECT_EQ(block->time[0], arrival - 20ms);
  EXPECT_EQ(block->time[1], arrival - 10ms);
  EXPECT_EQ(block->time[2], arrival);
}

TEST_F(StreamingAmplifier, TimesNeverGoBack) {
  ASSERT_TRUE(start(100));
  wire.send(line(0), 1ms);
  wire.send(line(1) + line(2) + line(3), 2ms);
  pass(5ms);
  const auto block = next();
  ASSERT_TRUE(block);
  ASSERT_EQ(block->frames(), 4u);
  for (std::size_t k = 1; k < 4; ++k) EXPECT_LT(block->time[k - 1], block->time[k]);
}

TEST_F(StreamingAmplifier, RelaysAreWorkedWhileItStreams) {
  ASSERT_TRUE(start(100));
  wire.answer = [this](const std::string& request) {
    return std::vector<Piece>{{1ms, line(0) + "#" + request.substr(0, 3)},
                              {2ms, request.substr(3) + "\n" + line(1)}};
  };
  EXPECT_TRUE(closeRelay(2));
  const auto block = next();
  ASSERT_TRUE(block);
  EXPECT_EQ(block->frames(), 2u);
  EXPECT_EQ(block->lostBefore, 0u);
  EXPECT_EQ(block->damagedBefore, 0u);
}

TEST_F(StreamingAmplifier, AnAnswerForAnotherRelayIsNotTaken) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, "#CLOSE 1\n"}}; };
  const auto done = closeRelay(2);
  ASSERT_FALSE(done);
  EXPECT_EQ(done.error().code, ErrorCode::bad_answer);
  EXPECT_NE(done.error().text().find("the answer to another request: {relay} is \"1\""), std::string::npos)
      << done.error().text();
}

TEST_F(StreamingAmplifier, SamplesLeftOverFromAnEarlierRunDoNotDisturb) {
  wire.send("00;1\n" + line(7) + line(8), 0ms);  // the end of a line, then whole ones
  wire.answer = [this](const std::string& request) {
    return std::vector<Piece>{{1ms, line(9) + "#" + request + "\n"}};
  };
  EXPECT_TRUE(closeRelay(1));
  ASSERT_TRUE(start(100));
  const auto block = next(100ms);
  ASSERT_TRUE(block) << block.error().text();
  EXPECT_EQ(block->frames(), 1u) << "only the line that came after GO";
}

TEST_F(StreamingAmplifier, StopsAndDropsWhatStillComes) {
  ASSERT_TRUE(start(100));
  wire.send(line(0), 1ms);
  pass(2ms);
  ASSERT_TRUE(stop());
  EXPECT_EQ(wire.requests.back(), "HALT");
  wire.send(line(1) + line(2), 1ms);
  pass(5ms);
  const auto left = next();
  ASSERT_TRUE(left);
  EXPECT_EQ(left->frames(), 1u);
  EXPECT_EQ(next().error().code, ErrorCode::bad_use);
}

TEST_F(StreamingAmplifier, AStartThatFailsIsToldAndMayBeTriedAgain) {
  wire.answer = [](const std::string& request) {
    return std::vector<Piece>{{1ms, request == "GO" ? "#NO 4\n" : "#" + request + "\n"}};
  };
  EXPECT_EQ(start(100).error().code, ErrorCode::device_error);
  wire.answer = [](const std::string& request) { return std::vector<Piece>{{1ms, "#" + request + "\n"}}; };
  EXPECT_TRUE(start(100));
}

TEST_F(StreamingAmplifier, ALostConnectionIsToldAfterTheLastSamples) {
  ASSERT_TRUE(start(100));
  wire.send(line(0), 1ms);
  pass(5ms);
  wire.unplug();
  EXPECT_TRUE(next());
  const auto gone = next();
  ASSERT_FALSE(gone);
  EXPECT_EQ(gone.error().code, ErrorCode::io);
  EXPECT_NE(gone.error().text().find("the other end closed the connection"), std::string::npos);
}

TEST_F(StreamingAmplifier, ARestartOfTheDeviceIsNotTakenForAGreatLoss) {
  ASSERT_TRUE(start(100));
  wire.send(line(90) + line(91) + line(0) + line(1), 1ms);
  std::uint64_t frames = 0, lost = 0;
  while (frames < 4) {
    const auto block = next();
    ASSERT_TRUE(block);
    frames += block->frames();
    lost += block->lostBefore;
  }
  EXPECT_EQ(lost, 0u);
}

}  // namespace
}  // namespace shuntwright::test
