// proves P-05
#include "scripted_device.h"

namespace shuntwright::test {
namespace {

using ::testing::Test;

constexpr const char* kBoard = R"(
[text]
request_end = "\n"
answer_end = "\r\n"
timeout = "100 ms"
retries = 1
[[error]]
pattern = "ERR {code} {text}"
[identify]
ask = "ID?"
answer = "ID {model} {serial} {version}"
model = "BOARD8"
[relays]
count = 8
close = { ask = "CLOSE {relay:02}", answer = "OK" }
open = { ask = "OPEN {relay:02}", answer = "OK" }
state = { ask = "STATE {relay:02}", answer = "{state}", closed = "1", open = "0" }
)";

class RelayBoard : public DeviceTest {
 protected:
  void SetUp() override {
    profile(kBoard);
    wire.answer = [](const std::string&) { return std::vector<Piece>{{2ms, "OK\r\n"}}; };
    open();
  }
  Result<bool> closed(int relay) {
    return await<bool>([this, relay] { return device->relayClosed(relay); });
  }
  Result<device::Identity> identify() {
    return await<device::Identity>([this] { return device->identify(); });
  }
};

TEST_F(RelayBoard, SendsTheRequestOfTheProfileAndTakesItsAnswer) {
  EXPECT_TRUE(closeRelay(3));
  EXPECT_EQ(wire.requests, std::vector<std::string>{"CLOSE 03"});
  EXPECT_EQ(since(clock.now()), 2ms);
}

TEST_F(RelayBoard, OpensAllOneByOneWhereTheProfileHasNoOpenAll) {
  wire.answer = [](const std::string& request) {
    return std::vector<Piece>{{1ms, request == "OPEN 02" ? "ERR 7 stuck\r\n" : "OK\r\n"}};
  };
  const auto opened = await<void>([this] { return device->openAllRelays(); });
  EXPECT_EQ(wire.requests.size(), 8u);
  EXPECT_EQ(wire.requests.back(), "OPEN 08");
  ASSERT_FALSE(opened);
  EXPECT_EQ(opened.error().code, ErrorCode::device_error);
}

TEST_F(RelayBoard, ReadsTheStateBack) {
  wire.answer = [](const std::string& request) {
    return std::vector<Piece>{{1ms, request == "STATE 05" ? "1\r\n" : "0\r\n"}};
  };
  EXPECT_EQ(closed(5), true);
  EXPECT_EQ(closed(6), false);
}

TEST_F(RelayBoard, RefusesARelayThatIsNotThere) {
  EXPECT_EQ(closeRelay(9).error().code, ErrorCode::bad_use);
  EXPECT_EQ(closeRelay(0).error().code, ErrorCode::bad_use);
  EXPECT_TRUE(wire.requests.empty());
}

TEST_F(RelayBoard, SaysWhoItIs) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, "ID BOARD8 S-17 1.2\r\n"}}; };
  const auto identity = identify();
  ASSERT_TRUE(identity);
  EXPECT_EQ(identity->serialNumber, "S-17");
  EXPECT_EQ(identity->version, "1.2");
}

TEST_F(RelayBoard, RefusesAnotherModelAndAnotherSerialNumber) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, "ID BOARD16 S-17 1.2\r\n"}}; };
  EXPECT_EQ(identify().error().code, ErrorCode::refused);
  described.serialNumber = "S-18";
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, "ID BOARD8 S-17 1.2\r\n"}}; };
  open();
  const auto swapped = identify();
  ASSERT_FALSE(swapped);
  EXPECT_EQ(swapped.error().code, ErrorCode::refused);
  EXPECT_NE(swapped.error().message.find("S-18"), std::string::npos);
}

// ---- nothing, garbage, half an answer, an error answer: the error names device, request and what came

TEST_F(RelayBoard, SilenceIsATimeoutThatNamesDeviceRequestAndTheExpectedAnswer) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{}; };
  const auto done = closeRelay(3);
  ASSERT_FALSE(done);
  EXPECT_EQ(done.error().code, ErrorCode::timeout);
  const std::string text = done.error().text();
  EXPECT_NE(text.find("device amp1 (tcp:10.0.0.7:5025), request \"CLOSE 03\""), std::string::npos) << text;
  EXPECT_NE(text.find("nothing came"), std::string::npos) << text;
  EXPECT_NE(text.find("expected \"OK\" (scripted.toml:"), std::string::npos) << text;
  EXPECT_NE(text.find("tried 2 times"), std::string::npos) << text;
  EXPECT_EQ(wire.requests.size(), 2u);
}

TEST_F(RelayBoard, GarbageIsABadAnswerThatQuotesIt) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, "\x81\x02?!\r\n"}}; };
  const auto done = closeRelay(3);
  ASSERT_FALSE(done);
  EXPECT_EQ(done.error().code, ErrorCode::bad_answer);
  const std::string text = done.error().text();
  EXPECT_NE(text.find("amp1"), std::string::npos) << text;
  EXPECT_NE(text.find("\"CLOSE 03\""), std::string::npos) << text;
  EXPECT_NE(text.find("expected \"OK\", got \"\\x81\\x02?!\""), std::string::npos) << text;
}

TEST_F(RelayBoard, HalfAnAnswerIsATimeoutThatQuotesTheHalf) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, "OK\r"}}; };
  const auto done = closeRelay(3);
  ASSERT_FALSE(done);
  EXPECT_EQ(done.error().code, ErrorCode::timeout);
  EXPECT_NE(done.error().text().find("half an answer in 100 ms: got \"OK\\r\" without the end \"\\r\\n\""),
            std::string::npos)
      << done.error().text();
}

TEST_F(RelayBoard, AnErrorAnswerIsNotTriedAgainAndKeepsCodeAndText) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, "ERR 12 relay driver hot\r\n"}}; };
  const auto done = closeRelay(3);
  ASSERT_FALSE(done);
  EXPECT_EQ(done.error().code, ErrorCode::device_error);
  const std::string text = done.error().text();
  EXPECT_NE(text.find("error 12: relay driver hot"), std::string::npos) << text;
  EXPECT_NE(text.find("device amp1"), std::string::npos) << text;
  EXPECT_NE(text.find("\"CLOSE 03\""), std::string::npos) << text;
  EXPECT_EQ(wire.requests.size(), 1u);
}

TEST_F(RelayBoard, AStateThatIsNeitherWordIsABadAnswer) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, "maybe\r\n"}}; };
  const auto state = closed(3);
  ASSERT_FALSE(state);
  EXPECT_EQ(state.error().code, ErrorCode::bad_answer);
  EXPECT_NE(state.error().text().find("\"maybe\""), std::string::npos) << state.error().text();
}

TEST_F(RelayBoard, AnOverlongLineIsReportedAndTheNextAnswerIsRead) {
  int asked = 0;
  wire.answer = [&](const std::string&) {
    return std::vector<Piece>{{1ms, asked++ == 0 ? std::string(10000, 'x') + "\r\n" : "OK\r\n"}};
  };
  EXPECT_TRUE(closeRelay(3));
  EXPECT_EQ(asked, 2);
}

// ---- trying again

TEST_F(RelayBoard, TriesAgainAfterSilence) {
  int asked = 0;
  wire.answer = [&](const std::string&) {
    return asked++ == 0 ? std::vector<Piece>{} : std::vector<Piece>{{2ms, "OK\r\n"}};
  };
  EXPECT_TRUE(closeRelay(3));
  EXPECT_EQ(wire.requests.size(), 2u);
}

TEST_F(RelayBoard, ALateAnswerIsDroppedAndNotTakenForTheNextOne) {
  int asked = 0;
  wire.answer = [&](const std::string& request) {
    if (asked++ == 0) return std::vector<Piece>{{120ms, "1\r\n"}};  // 20 ms late
    return std::vector<Piece>{{2ms, request == "STATE 05" ? "0\r\n" : "1\r\n"}};
  };
  EXPECT_EQ(closed(5), false);
}

TEST_F(RelayBoard, TheRestOfAHalfAnswerIsNotPutBeforeTheNextOne) {
  int asked = 0;
  wire.answer = [&](const std::string&) { return std::vector<Piece>{{2ms, asked++ == 0 ? "O" : "OK\r\n"}}; };
  EXPECT_TRUE(closeRelay(3));
  EXPECT_EQ(asked, 2);
}

TEST_F(RelayBoard, AnAnswerInPiecesIsOneAnswer) {
  wire.answer = [](const std::string&) { return std::vector<Piece>{{1ms, "O"}, {2ms, "K\r"}, {3ms, "\n"}}; };
  EXPECT_TRUE(closeRelay(3));
  EXPECT_EQ(since(clock.now()), 3ms);
}

TEST_F(RelayBoard, LinesNobodyAskedForDoNotDisturbTheNextRequest) {
  wire.send("HELLO\r\nREADY\r\n");
  pass(10ms);
  EXPECT_TRUE(closeRelay(3));
}

TEST_F(RelayBoard, ALostConnectionFailsTheRequestAtOnce) {
  wire.answer = [this](const std::string&) {
    wire.unplug();
    return std::vector<Piece>{};
  };
  const auto done = closeRelay(3);
  ASSERT_FALSE(done);
  EXPECT_EQ(done.error().code, ErrorCode::io);
  EXPECT_LT(since(clock.now()), 1ms);
  EXPECT_NE(done.error().text().find("amp1"), std::string::npos);
  EXPECT_EQ(closeRelay(4).error().code, ErrorCode::io);
}

TEST_F(RelayBoard, RequestsOfSeveralCoroutinesAreTakenInTurn) {
  run([this]() -> Task<void> {
    std::vector<std::function<Task<void>()>> bodies;
    for (int relay = 1; relay <= 5; ++relay) {
      bodies.push_back([this, relay]() -> Task<void> {
        auto done = co_await device->closeRelay(relay);
        EXPECT_TRUE(done);
      });
    }
    co_await whenAll(std::move(bodies));
  });
  EXPECT_EQ(wire.requests,
            (std::vector<std::string>{"CLOSE 01", "CLOSE 02", "CLOSE 03", "CLOSE 04", "CLOSE 05"}));
  EXPECT_EQ(since(clock.now()), 10ms);
}

TEST_F(RelayBoard, ARequestCutShortOwesItsAnswerAndTheNextOneWaitsForIt) {
  // Cancelled 10 ms after CLOSE went out; its OK comes at 50 ms and must not pass for the answer to OPEN,
  // which is an error.
  wire.answer = [](const std::string& request) {
    return request.starts_with("CLOSE") ? std::vector<Piece>{{50ms, "OK\r\n"}}
                                        : std::vector<Piece>{{5ms, "ERR 3 stuck\r\n"}};
  };
  boost::asio::cancellation_signal signal;
  bool ended = false;
  boost::asio::co_spawn(
      context, [this]() -> Task<void> { co_await device->closeRelay(1); },
      boost::asio::bind_cancellation_slot(signal.slot(), [&](std::exception_ptr e) {
        ended = true;
        EXPECT_TRUE(e);
      }));
  clock.at(clock.now() + 10ms, [&] { signal.emit(boost::asio::cancellation_type::terminal); });
  runVirtual(context, clock, [&] { return ended; });
  ASSERT_TRUE(ended);
  EXPECT_EQ(since(clock.now()), 10ms);
  const auto opened = await<void>([this] { return device->openRelay(1); });
  ASSERT_FALSE(opened);
  EXPECT_EQ(opened.error().code, ErrorCode::device_error);
  EXPECT_EQ(since(clock.now()), 55ms);
}

}  // namespace
}  // namespace shuntwright::test
