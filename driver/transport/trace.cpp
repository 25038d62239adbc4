#include "driver/transport/trace.h"

#include <charconv>
#include <cstdio>
#include <fstream>
#include <iterator>

namespace shuntwright::transport {

namespace {

constexpr std::string_view kFirstLine = "shuntwright trace 1";
constexpr std::int64_t kSecond = 1'000'000'000;

std::string escaped(ByteView bytes) {
  return quoted(bytes, bytes.size());
}

int hexDigit(char c) {
  if (c >= '0' && c <= '9') return c - '0';
  if (c >= 'a' && c <= 'f') return c - 'a' + 10;
  if (c >= 'A' && c <= 'F') return c - 'A' + 10;
  return -1;
}

/// The bytes of a quoted text that makes up all of `text`. False when it is not one.
bool unescape(std::string_view text, Bytes& out) {
  if (text.size() < 2 || text.front() != '"' || text.back() != '"') return false;
  text = text.substr(1, text.size() - 2);
  for (std::size_t i = 0; i < text.size(); ++i) {
    char c = text[i];
    if (c == '"') return false;
    if (c == '\\') {
      if (++i == text.size()) return false;
      switch (text[i]) {
        case 'r':
          c = '\r';
          break;
        case 'n':
          c = '\n';
          break;
        case 't':
          c = '\t';
          break;
        case '"':
          c = '"';
          break;
        case '\\':
          c = '\\';
          break;
        case 'x': {
          if (i + 2 >= text.size()) return false;
          const int high = hexDigit(text[i + 1]), low = hexDigit(text[i + 2]);
          if (high < 0 || low < 0) return false;
          c = static_cast<char>(high * 16 + low);
          i += 2;
          break;
        }
        default:
          return false;
      }
    }
    out.push_back(static_cast<std::byte>(c));
  }
  return true;
}

template <class Number>
bool readWhole(std::string_view text, Number& out) {
  const auto end = text.data() + text.size();
  const auto result = std::from_chars(text.data(), end, out);
  return result.ec == std::errc() && result.ptr == end && !text.empty();
}

/// "+12.000000345": seconds with exactly nine decimals.
bool readOffset(std::string_view text, Nanoseconds& out) {
  const std::size_t point = text.find('.');
  if (!text.starts_with('+') || point == std::string_view::npos || text.size() != point + 10) return false;
  std::uint32_t whole = 0, part = 0;
  if (!readWhole(text.substr(1, point - 1), whole) || !readWhole(text.substr(point + 1), part)) return false;
  out = Nanoseconds(static_cast<std::int64_t>(whole) * kSecond + static_cast<std::int64_t>(part));
  return true;
}

std::string_view word(std::string_view& rest) {
  const std::size_t end = rest.find(' ');
  const std::string_view out = rest.substr(0, end);
  rest = end == std::string_view::npos ? std::string_view() : rest.substr(end + 1);
  return out;
}

/// What is wrong with the line, or an empty string.
std::string readEvent(std::string_view line, TraceEvent& event) {
  std::string_view rest = line;
  if (!readOffset(word(rest), event.offset)) return "expected the time, like +0.001234567";
  event.device = word(rest);
  if (event.device.empty()) return "expected the name of a device after the time";
  const std::string_view what = word(rest);
  if (what == "open" || what == "close") {
    event.kind = what == "open" ? TraceEvent::Kind::open : TraceEvent::Kind::close;
    return rest.empty() ? "" : "nothing may follow " + quoted(what);
  }
  if (what == ">") {
    event.kind = TraceEvent::Kind::write;
  } else if (what == "<") {
    event.kind = TraceEvent::Kind::read;
  } else if (what == "!") {
    event.kind = TraceEvent::Kind::failure;
  } else {
    return "expected open, close, >, < or ! after the device, got " + quoted(what);
  }
  if (!unescape(rest, event.bytes))
    return "expected a text in quotes with the escapes \\r \\n \\t \\\" \\\\ \\xHH";
  return {};
}

bool readStart(std::string_view line, Instant& start) {
  if (word(line) != "start") return false;
  std::int64_t ns = 0;
  if (!readWhole(word(line), ns)) return false;
  start = Instant(Nanoseconds(ns));
  return true;
}

}  // namespace

std::string traceHeader(Instant start) {
  return std::string(kFirstLine) + "\nstart " + std::to_string(start.time_since_epoch().count()) + " " +
         rfc3339(start) + "\n";
}

std::string traceLine(TraceEvent::Kind kind, Nanoseconds offset, std::string_view device, ByteView bytes) {
  char time[48];
  const std::int64_t ns = offset.count();
  std::snprintf(time, sizeof time, "+%lld.%09lld ", static_cast<long long>(ns / kSecond),
                static_cast<long long>(ns % kSecond));
  std::string out = time;
  out += device;
  switch (kind) {
    case TraceEvent::Kind::open:
      out += " open";
      break;
    case TraceEvent::Kind::close:
      out += " close";
      break;
    case TraceEvent::Kind::write:
      out += " > " + escaped(bytes);
      break;
    case TraceEvent::Kind::read:
      out += " < " + escaped(bytes);
      break;
    case TraceEvent::Kind::failure:
      out += " ! " + escaped(bytes);
      break;
  }
  return out + '\n';
}

Result<Trace> parseTrace(std::string_view text, const std::string& file) {
  Trace trace;
  bool headed = false, started = false;
  int number = 0;
  const auto wrong = [&](std::string message) {
    return fail(ErrorCode::bad_file, std::move(message), Place{file, number, 0}.text(),
                "write a trace with --trace FILE; the form of its lines is told in driver/transport/trace.h");
  };
  while (!text.empty()) {
    const std::size_t end = text.find('\n');
    const std::string_view line = text.substr(0, end);
    text = end == std::string_view::npos ? std::string_view() : text.substr(end + 1);
    ++number;
    // The last line may have been cut off when the program was killed.
    if (end == std::string_view::npos && started && !line.starts_with('#')) break;
    if (!headed) {
      if (line != kFirstLine)
        return wrong("this is no trace: it does not begin with \"" + std::string(kFirstLine) + "\"");
      headed = true;
    } else if (line.empty() || line.starts_with('#')) {
      continue;
    } else if (!started) {
      if (!readStart(line, trace.start)) return wrong("expected \"start\" and nanoseconds since 1970");
      started = true;
    } else {
      TraceEvent event;
      event.line = number;
      if (std::string problem = readEvent(line, event); !problem.empty()) return wrong(std::move(problem));
      trace.events.push_back(std::move(event));
    }
  }
  if (!started) return wrong("the trace has no start line");
  return trace;
}

Result<Trace> loadTrace(const std::string& file) {
  std::ifstream in(file, std::ios::binary);
  if (!in)
    return fail(ErrorCode::io, "cannot read the trace", file, "check the path in the port \"replay:FILE\"");
  const std::string text((std::istreambuf_iterator<char>(in)), std::istreambuf_iterator<char>());
  return parseTrace(text, file);
}

}  // namespace shuntwright::transport
