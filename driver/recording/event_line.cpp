#include "driver/recording/event_line.h"

#include <boost/json/object.hpp>
#include <boost/json/serialize.hpp>

namespace shuntwright::recording {

namespace {

/// Bytes of the UTF-8 character at the start of the text; 0 when there is none (RFC 3629, section 4).
std::size_t characterAt(std::string_view text) {
  const auto byte = [&](std::size_t k) { return k < text.size() ? static_cast<unsigned char>(text[k]) : 0u; };
  const auto follows = [&](std::size_t k, unsigned least = 0x80, unsigned most = 0xBF) {
    return byte(k) >= least && byte(k) <= most;
  };
  const unsigned first = byte(0);
  if (first < 0x80) return 1;
  if (first >= 0xC2 && first <= 0xDF) return follows(1) ? 2 : 0;
  if (first >= 0xE0 && first <= 0xEF) {
    const bool second = follows(1, first == 0xE0 ? 0xA0 : 0x80, first == 0xED ? 0x9F : 0xBF);
    return second && follows(2) ? 3 : 0;
  }
  if (first >= 0xF0 && first <= 0xF4) {
    const bool second = follows(1, first == 0xF0 ? 0x90 : 0x80, first == 0xF4 ? 0x8F : 0xBF);
    return second && follows(2) && follows(3) ? 4 : 0;
  }
  return 0;
}

}  // namespace

bool isOperators(std::string_view kind) {
  return kind == "mark" || kind == kStepBegin || kind == kStepEnd;
}

std::string validUtf8(std::string_view text) {
  std::string out;
  out.reserve(text.size());
  while (!text.empty()) {
    const std::size_t size = characterAt(text);
    out += size > 0 ? text.substr(0, size) : std::string_view("\xEF\xBF\xBD");
    text.remove_prefix(size > 0 ? size : 1);
  }
  return out;
}

std::string eventLine(std::string_view kind, Instant when, std::string_view text, std::string_view device,
                      std::uint64_t count, bool continued) {
  namespace json = boost::json;
  json::object o;
  o["unix_ns"] = when.time_since_epoch().count();
  o["time"] = rfc3339(when);
  o["kind"] = validUtf8(kind);
  o["text"] = validUtf8(text);
  if (!device.empty()) o["device"] = validUtf8(device);
  if (count > 0) o["count"] = count;
  if (continued) o["continued"] = true;
  return json::serialize(o) + "\n";
}

}  // namespace shuntwright::recording
