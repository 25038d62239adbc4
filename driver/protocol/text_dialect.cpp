#include "driver/protocol/text_dialect.h"

#include <charconv>

#include "driver/protocol/checksum.h"

namespace shuntwright::protocol {

using description::Exchange;
using description::Profile;
using description::Segment;

namespace {

bool readWhole(const Fields::Field& field, std::uint64_t& value) {
  const auto kind = field.segment->kind;
  const int base = kind == Segment::Kind::hex_upper || kind == Segment::Kind::hex_lower ? 16 : 10;
  std::string_view text = field.text;
  while (text.starts_with(' ')) text.remove_prefix(1);
  while (text.ends_with(' ')) text.remove_suffix(1);
  const auto read = std::from_chars(text.data(), text.data() + text.size(), value, base);
  return read.ec == std::errc() && read.ptr == text.data() + text.size();
}

bool sameNumber(const Fields::Field& field, const Value& value) {
  if (const auto* text = std::get_if<std::string_view>(&value.value)) return field.text == *text;
  const double wanted = std::holds_alternative<double>(value.value)
                            ? std::get<double>(value.value)
                            : static_cast<double>(std::get<long long>(value.value));
  std::uint64_t whole = 0;
  if (readWhole(field, whole)) return static_cast<double>(whole) == wanted;
  const char* p = field.text.data();
  double came = 0;
  return readDecimal(p, p + field.text.size(), came) && came == wanted;
}

}  // namespace

TextDialect::TextDialect(std::shared_ptr<const Profile> profile) : profile_(std::move(profile)) {
  if (profile_->inputs) {
    inputs_ = static_cast<std::size_t>(profile_->inputs->count);
    format_.emplace(*profile_->inputs);
  }
  const auto& protocol = profile_->protocol;
  const std::size_t end = protocol.requestEnd.find(protocol.answerEnd);
  echoEndsLine_ = end != std::string::npos;
  if (echoEndsLine_) echoTail_ = protocol.requestEnd.substr(end + protocol.answerEnd.size());
}

LineSplitter TextDialect::splitter() const {
  return LineSplitter(profile_->protocol.answerEnd, static_cast<std::size_t>(profile_->protocol.longestLine));
}

Result<Request> TextDialect::request(const Exchange& exchange, std::span<const Value> values) const {
  auto text = render(exchange.ask, values);
  if (!text) return std::unexpected(std::move(text.error()));
  Request request;
  request.exchange = &exchange;
  request.text = std::move(*text);
  request.line = request.text;
  appendChecksum(profile_->protocol.checksum, request.line);
  append(request.bytes, bytesOf(request.line));
  const std::string& requestEnd = profile_->protocol.requestEnd;
  append(request.bytes, bytesOf(requestEnd));
  request.echo = request.line + requestEnd.substr(0, requestEnd.find(profile_->protocol.answerEnd));
  for (const Value& value : values) {
    // Views into the caller's text would not outlive it; numbers are all that answers repeat.
    if (!std::holds_alternative<std::string_view>(value.value)) request.values.push_back(value);
  }
  return request;
}

std::string_view TextDialect::withoutEcho(std::string_view line, const Request& request,
                                          bool& expected) const {
  if (!expected) {
    if (!echoTail_.empty() && line.starts_with(echoTail_)) line.remove_prefix(echoTail_.size());
    return line;
  }
  if (echoEndsLine_) {
    if (line != request.echo) return line;
    expected = false;
    return {};
  }
  const std::size_t at = line.find(request.echo);
  if (at == std::string_view::npos) return line;
  expected = false;
  return line.substr(at + request.echo.size());
}

Incoming TextDialect::classify(std::string_view line, const Request* pending, std::span<float> ratio,
                               std::span<std::uint8_t> flags) {
  Incoming out;
  auto body = stripChecksum(profile_->protocol.checksum, line);
  if (!body) {
    out.kind = beginsLikeStream(line) ? Incoming::Kind::damaged_stream : Incoming::Kind::damaged;
    out.problem = std::move(body.error().message);
    return out;
  }
  out.body = *body;
  if (readStream(*body, out, ratio, flags)) return out;
  for (const auto& error : profile_->errors) {
    if (!match(error.pattern, *body, fields_)) continue;
    out.kind = Incoming::Kind::device_error;
    out.code = fields_["code"];
    out.text = fields_["text"];
    return out;
  }
  if (pending && pending->wantsAnswer()) {
    const auto& expected = *pending->exchange->answer;
    if (!match(expected, *body, fields_)) {
      out.problem = "expected " + quoted(expected.source) + ", got " + quoted(line);
    } else if (repeatsValues(*pending, out.problem)) {
      out.kind = Incoming::Kind::answer;
      return out;
    } else {
      out.problem += " in " + quoted(line);
    }
  }
  // A literal beginning tells a broken line of samples from anything else.
  if (beginsLikeStream(*body)) {
    out.kind = Incoming::Kind::damaged_stream;
    out.problem = streamProblem(*body);
  } else if (out.problem.empty()) {
    out.problem = "not asked for: " + quoted(line);
  }
  return out;
}

bool TextDialect::beginsLikeStream(std::string_view line) const {
  if (!profile_->inputs || !profile_->inputs->streamLine) return false;
  const auto& segments = profile_->inputs->streamLine->segments;
  return !segments.empty() && segments.front().kind == Segment::Kind::literal &&
         line.starts_with(segments.front().text);
}

bool TextDialect::readStream(std::string_view body, Incoming& out, std::span<float> ratio,
                             std::span<std::uint8_t> flags) {
  if (!profile_->inputs || !profile_->inputs->streamLine) return false;
  if (!match(*profile_->inputs->streamLine, body, fields_)) return false;
  const auto* counter = fields_.find("counter");
  const auto* list = fields_.find("values");
  if (counter && !readsCounter(*counter, out.counter)) return false;
  if (!list || !readValues(*format_, list->text, list->segment->separator, ratio, flags)) return false;
  out.kind = Incoming::Kind::stream;
  return true;
}

bool TextDialect::readsCounter(const Fields::Field& field, std::uint64_t& value) const {
  const int bits = profile_->inputs->counterBits;
  return readWhole(field, value) && (bits <= 0 || bits >= 64 || value >> bits == 0);
}

std::string TextDialect::streamProblem(std::string_view body) {
  const auto& line = *profile_->inputs->streamLine;
  if (!match(line, body, fields_)) return "expected " + quoted(line.source) + ", got " + quoted(body);
  std::uint64_t number = 0;
  if (const auto* counter = fields_.find("counter"); counter && !readsCounter(*counter, number)) {
    return "the counter is no number of " + std::to_string(profile_->inputs->counterBits) + " bits in " +
           quoted(body);
  }
  const auto* list = fields_.find("values");
  if (!list) return "no values in " + quoted(body);
  return whatIsWrong(*format_, list->text, list->segment->separator, inputs_) + " in " + quoted(body);
}

bool TextDialect::repeatsValues(const Request& request, std::string& problem) const {
  for (const auto& field : fields_.all()) {
    for (const Value& value : request.values) {
      if (value.name != field.segment->text || sameNumber(field, value)) continue;
      problem = "the answer to another request: {" + field.segment->text + "} is " + quoted(field.text);
      return false;
    }
  }
  return true;
}

Result<void> TextDialect::values(std::span<float> ratio, std::span<std::uint8_t> flags) const {
  const auto* list = fields_.find("values");
  if (!list || !format_) return fail(ErrorCode::bad_answer, "the answer has no {values}");
  if (readValues(*format_, list->text, list->segment->separator, ratio, flags)) return {};
  return fail(ErrorCode::bad_answer,
              whatIsWrong(*format_, list->text, list->segment->separator, ratio.size()));
}

}  // namespace shuntwright::protocol
