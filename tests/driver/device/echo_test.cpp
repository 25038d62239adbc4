#include "scripted_device.h"

namespace shuntwright::test {
namespace {

/// Ends of requests and of answers, as devices that echo combine them.
struct Ends {
  std::string request, answer;
};

class EchoingBoard : public DeviceTest, public ::testing::WithParamInterface<Ends> {
 protected:
  static std::string escaped(const std::string& text) {
    std::string out;
    for (const char c : text) out += c == '\r' ? "\\r" : "\\n";
    return out;
  }
  void SetUp() override {
    profile("[text]\nrequest_end = \"" + escaped(GetParam().request) + "\"\nanswer_end = \"" +
            escaped(GetParam().answer) + R"("
echo = true
timeout = "50 ms"
retries = 0
[relays]
count = 4
close = { ask = "CLOSE {relay}" }
open = { ask = "OPEN {relay}", answer = "DONE" }
state = { ask = "STATE {relay}", answer = "{state}" }
)");
    wire.requestEnd = GetParam().request;
    open();
  }
  std::vector<Piece> echoThen(const std::string& request, const std::string& answer) {
    return {{1ms, request + GetParam().request}, {2ms, answer + GetParam().answer}};
  }
  Result<bool> closed(int relay) {
    return await<bool>([this, relay] { return device->relayClosed(relay); });
  }
};

TEST_P(EchoingBoard, TheEchoIsTakenOffBeforeTheAnswer) {
  wire.answer = [this](const std::string& request) { return echoThen(request, "1"); };
  for (int k = 0; k < 3; ++k) {
    const auto state = closed(2);
    ASSERT_TRUE(state) << state.error().text();
    EXPECT_TRUE(*state);
  }
}

TEST_P(EchoingBoard, EchoAndAnswerMayComeTogetherOrByteByByte) {
  wire.answer = [this](const std::string& request) {
    return std::vector<Piece>{{1ms, request + GetParam().request + "0" + GetParam().answer}};
  };
  EXPECT_EQ(closed(1), false);
  wire.answer = [this](const std::string& request) {
    std::vector<Piece> out;
    for (const char c : request + GetParam().request + "1" + GetParam().answer) {
      out.push_back({1ms * static_cast<int>(out.size() + 1), std::string(1, c)});
    }
    return out;
  };
  EXPECT_EQ(closed(1), true);
}

INSTANTIATE_TEST_SUITE_P(Ends, EchoingBoard,
                         ::testing::Values(Ends{"\n", "\n"}, Ends{"\r\n", "\r\n"}, Ends{"\r", "\r\n"},
                                           Ends{"\n", "\r\n"}, Ends{"\r\n", "\r"}, Ends{"\r\n", "\n"}),
                         [](const auto& ends) { return std::to_string(ends.index); });

class PlainEcho : public EchoingBoard {};

TEST_P(PlainEcho, IsWaitedForWhereARequestHasNoAnswer) {
  wire.answer = [](const std::string& request) { return std::vector<Piece>{{5ms, request + "\n"}}; };
  EXPECT_TRUE(closeRelay(1));
  EXPECT_EQ(since(clock.now()), 5ms);
  wire.answer = [](const std::string&) { return std::vector<Piece>{}; };
  EXPECT_EQ(closeRelay(1).error().code, ErrorCode::timeout);
}

TEST_P(PlainEcho, WithoutAnAnswerIsATimeoutThatSaysSo) {
  wire.answer = [](const std::string& request) { return std::vector<Piece>{{5ms, request + "\n"}}; };
  const auto state = closed(1);
  ASSERT_FALSE(state);
  EXPECT_EQ(state.error().code, ErrorCode::timeout);
  EXPECT_NE(state.error().text().find("the echo came, but no answer"), std::string::npos);
}

INSTANTIATE_TEST_SUITE_P(Ends, PlainEcho, ::testing::Values(Ends{"\n", "\n"}),
                         [](const auto&) { return std::string("Newline"); });

}  // namespace
}  // namespace shuntwright::test
