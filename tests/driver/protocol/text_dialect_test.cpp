// proves P-04
#include "driver/protocol/text_dialect.h"

#include <gtest/gtest.h>

#include "driver/description/load.h"
#include "split.h"

namespace shuntwright::protocol {
namespace {

constexpr const char* kProfile = R"(
[profile]
name = "dialect"
title = "Dialect"
[reach.tcp]
port = 5025
[text]
request_end = "\r"
answer_end = "\r\n"
checksum = { kind = "crc16-ccitt-false", separator = ";" }
[[error]]
pattern = "ERR {code} {text}"
[inputs]
count = 3
gives = "mV/V"
saturated = ["OVR"]
full_scale = "4 mV/V"
completions = [{ value = "120 ohm", tolerance = "0.1 %" }]
excitations = ["5 V"]
rates = ["100 Hz"]
[inputs.stream]
start = { ask = "GO {rate}", answer = "GO" }
stop = { ask = "HALT", answer = "HALTED" }
line = "D{counter} {values:,}"
counter_bits = 8
[relays]
count = 4
close = { ask = "CLOSE {relay:02}", answer = "CLOSED {relay:02}" }
open = { ask = "OPEN {relay:02}", answer = "OPENED {relay:02}" }
)";

std::string sum(std::string text) {
  unsigned crc = 0xFFFF;  // bit by bit, as the standard's definition reads
  for (const char c : text) {
    crc ^= static_cast<unsigned>(static_cast<unsigned char>(c)) << 8;
    for (int bit = 0; bit < 8; ++bit) crc = ((crc << 1) ^ (crc & 0x8000 ? 0x1021u : 0u)) & 0xFFFF;
  }
  char digits[8];
  std::snprintf(digits, sizeof digits, ";%04X", crc);
  return text + digits;
}

class Dialect : public ::testing::Test {
 protected:
  Dialect() {
    description::Diagnostics diagnostics;
    auto parsed = description::parseProfile(kProfile, "dialect.toml", diagnostics);
    EXPECT_TRUE(parsed) << diagnostics.render(false);
    profile = std::make_shared<description::Profile>(std::move(*parsed));
    dialect.emplace(profile);
  }
  Request closeRequest(long long relay) {
    const std::vector<Value> values{{"relay", relay}};
    return *dialect->request(profile->relays->close, values);
  }
  Incoming classify(const std::string& line, const Request* pending = nullptr) {
    kept = line;
    return dialect->classify(kept, pending, ratio, flags);
  }

  std::shared_ptr<description::Profile> profile;
  std::optional<TextDialect> dialect;
  std::string kept;
  std::vector<float> ratio = std::vector<float>(3);
  std::vector<std::uint8_t> flags = std::vector<std::uint8_t>(3);
};

using Kind = Incoming::Kind;

TEST_F(Dialect, ARequestHasCheckSumAndEnd) {
  const Request request = closeRequest(3);
  EXPECT_EQ(request.text, "CLOSE 03");
  EXPECT_EQ(textOf(request.bytes), sum("CLOSE 03") + "\r");
  EXPECT_TRUE(request.wantsAnswer());
}

TEST_F(Dialect, TellsLinesApart) {
  const Request request = closeRequest(3);
  EXPECT_EQ(classify(sum("CLOSED 03"), &request).kind, Kind::answer);
  EXPECT_EQ(dialect->fields()["relay"], "03");
  EXPECT_EQ(classify(sum("CLOSED 3"), &request).kind, Kind::answer) << "the number counts, not its zeros";
  EXPECT_EQ(classify(sum("CLOSED 04"), &request).kind, Kind::unknown);
  EXPECT_EQ(classify(sum("CLOSED 03")).kind, Kind::unknown) << "nobody asked";
  const auto error = classify(sum("ERR 12 hot relay"), &request);
  EXPECT_EQ(error.kind, Kind::device_error);
  EXPECT_EQ(error.code, "12");
  EXPECT_EQ(error.text, "hot relay");
  const auto samples = classify(sum("D250 0.5,-1,OVR"), &request);
  EXPECT_EQ(samples.kind, Kind::stream);
  EXPECT_EQ(samples.counter, 250u);
  EXPECT_EQ(ratio[1], -1e-3f);
  EXPECT_EQ(flags[2], kValueSaturated);
  EXPECT_EQ(classify("CLOSED 03", &request).kind, Kind::damaged);
  EXPECT_EQ(classify("D250 0.5,-1,2", &request).kind, Kind::damaged_stream);
}

TEST_F(Dialect, SaysWhatItExpectedAndWhatCame) {
  const Request request = closeRequest(3);
  EXPECT_EQ(classify(sum("WHAT?"), &request).problem,
            "expected \"CLOSED {relay:02}\", got " + shuntwright::quoted(sum("WHAT?")));
  EXPECT_NE(classify(sum("D250 0.5,-1")).problem.find("expected 3 values, got 2"), std::string::npos);
  EXPECT_NE(classify(sum("D256 1,2,3")).problem.find("counter"), std::string::npos) << "8 bits end at 255";
}

TEST_F(Dialect, AnAnswerMayBeginLikeALineOfSamples) {
  profile->relays->close.answer->segments = {{description::Segment::Kind::literal, "DONE", 0, {}}};
  const Request request = closeRequest(3);
  EXPECT_EQ(classify(sum("DONE"), &request).kind, Kind::answer);
}

// Whatever is damaged, a damaged line of samples gives no samples, and a damaged answer is no answer.
TEST_F(Dialect, DamagedLinesAreNeverTaken) {
  const Request request = closeRequest(3);
  for (const std::string& line : {sum("D17 0.5,-1,2"), sum("CLOSED 03")}) {
    test::everyDamage(line, [&](const std::string& damaged) {
      std::string upper = damaged;
      for (std::size_t k = line.size() - 4; k < upper.size(); ++k) {
        upper[k] = static_cast<char>(std::toupper(static_cast<unsigned char>(upper[k])));
      }
      if (upper == line) return;
      const auto kind = classify(damaged, &request).kind;
      EXPECT_TRUE(kind == Kind::damaged || kind == Kind::damaged_stream) << damaged;
    });
  }
}

TEST_F(Dialect, AConversationGivesTheSameHoweverItIsCut) {
  const Request request = closeRequest(3);
  const std::string conversation = sum("D1 1,2,3") + "\r\n" + sum("CLOSED 03") + "\r\n" + "noise\r\n" +
                                 sum("D3 4,5,6") + "\r\n" + sum("ERR 1 no") + "\r\n";
  test::everySplit(conversation, [&](const std::vector<std::string>& pieces) {
    LineSplitter splitter = dialect->splitter();
    std::vector<Kind> kinds;
    std::vector<float> first;
    for (const auto& piece : pieces) {
      splitter.feed(bytesOf(piece), [&](const LineSplitter::Line& line) {
        const auto incoming = dialect->classify(line.text, &request, ratio, flags);
        kinds.push_back(incoming.kind);
        if (incoming.kind == Kind::stream) first.push_back(ratio[0]);
      });
    }
    ASSERT_EQ(kinds, (std::vector<Kind>{Kind::stream, Kind::answer, Kind::damaged, Kind::stream,
                                        Kind::device_error}));
    ASSERT_EQ(first, (std::vector<float>{1e-3f, 4e-3f}));
  });
}

}  // namespace
}  // namespace shuntwright::protocol
