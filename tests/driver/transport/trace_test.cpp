#include "driver/transport/trace.h"

#include <gtest/gtest.h>

namespace shuntwright::transport {
namespace {

using Kind = TraceEvent::Kind;

constexpr const char* kHead = "shuntwright trace 1\nstart 1777887000000000000 2026-05-04T09:30:00.000Z\n";

std::string problem(const std::string& body) {
  const auto trace = parseTrace(kHead + body, "t.trace");
  return trace ? "" : trace.error().where + ": " + trace.error().message;
}

TEST(Trace, ReadsBackWhatItWrites) {
  Bytes every;
  for (int k = 0; k < 256; ++k) every.push_back(static_cast<std::byte>(k));
  const Instant start = VirtualClock::kDefaultStart;
  const std::string text = traceHeader(start) + traceLine(Kind::open, Nanoseconds(0), "amp1", {}) +
                           traceLine(Kind::write, Nanoseconds(1), "amp1", every) +
                           traceLine(Kind::read, Nanoseconds(12'000'000'345), "relays-2", bytesOf("OK\r\n")) +
                           traceLine(Kind::failure, Nanoseconds(13'000'000'000), "amp1", bytesOf("gone")) +
                           traceLine(Kind::close, Nanoseconds(13'000'000'001), "amp1", {});
  const auto trace = parseTrace(text, "t.trace");
  ASSERT_TRUE(trace) << trace.error().text();
  EXPECT_EQ(trace->start, start);
  ASSERT_EQ(trace->events.size(), 5u);
  EXPECT_EQ(trace->events[0].kind, Kind::open);
  EXPECT_EQ(trace->events[1].bytes, every);
  EXPECT_EQ(trace->events[1].line, 4);
  EXPECT_EQ(trace->events[2].offset, Nanoseconds(12'000'000'345));
  EXPECT_EQ(trace->events[2].device, "relays-2");
  EXPECT_EQ(textOf(trace->events[2].bytes), "OK\r\n");
  EXPECT_EQ(trace->events[3].kind, Kind::failure);
  EXPECT_EQ(trace->events[4].kind, Kind::close);
}

TEST(Trace, IsWrittenSoThatAPersonCanReadIt) {
  EXPECT_EQ(traceHeader(VirtualClock::kDefaultStart), kHead);
  EXPECT_EQ(traceLine(Kind::write, Nanoseconds(1'234'567), "amp1", bytesOf("ID?\r\n")),
            "+0.001234567 amp1 > \"ID?\\r\\n\"\n");
}

TEST(Trace, SkipsCommentsAndBlankLinesAndALastLineThatWasCutOff) {
  const auto trace =
      parseTrace(std::string(kHead) + "# hello\n\n+0.000000000 a open\n+0.000000001 a > \"ha", "t");
  ASSERT_TRUE(trace) << trace.error().text();
  EXPECT_EQ(trace->events.size(), 1u);
}

TEST(Trace, SaysInWhichLineWhatIsWrong) {
  EXPECT_EQ(problem("0.0 a open\n"), "t.trace:3: expected the time, like +0.001234567");
  EXPECT_EQ(problem("+0.5 a open\n"), "t.trace:3: expected the time, like +0.001234567");
  EXPECT_EQ(problem("# c\n+0.000000000\n"), "t.trace:4: expected the name of a device after the time");
  EXPECT_EQ(problem("+0.000000000 a ? \"x\"\n"),
            "t.trace:3: expected open, close, >, < or ! after the device, got \"?\"");
  for (const char* text :
       {"x", "\"x", "x\"", "\"\\q\"", "\"\\x1\"", "\"\\x1g\"", "\"a\"b\"", "\"\\\"", "\""}) {
    EXPECT_EQ(problem("+0.000000000 a > " + std::string(text) + "\n"),
              "t.trace:3: expected a text in quotes with the escapes \\r \\n \\t \\\" \\\\ \\xHH")
        << text;
  }
  EXPECT_NE(problem("+0.000000000 a open x\n"), "");
  EXPECT_EQ(parseTrace("hello\n", "t").error().message,
            "this is no trace: it does not begin with \"shuntwright trace 1\"");
  EXPECT_EQ(parseTrace("", "t").error().code, ErrorCode::bad_file);
  EXPECT_EQ(parseTrace("shuntwright trace 1\nbegin 5\n", "t").error().where, "t:2");
}

TEST(Trace, AMissingFileIsAnIoError) {
  const auto missing = loadTrace("/no/such/file.trace");
  ASSERT_FALSE(missing);
  EXPECT_EQ(missing.error().code, ErrorCode::io);
  EXPECT_EQ(missing.error().where, "/no/such/file.trace");
}

}  // namespace
}  // namespace shuntwright::transport
