#include "driver/device/connection.h"

#include <array>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/this_coro.hpp>
#include <boost/system/system_error.hpp>
#include <cstdio>

#include "driver/core/bytes.h"

namespace shuntwright::device {

namespace asio = boost::asio;
using protocol::Incoming;

namespace {

constexpr std::size_t kPiece = 16384;  // bytes a read takes at most

std::string milliseconds(Nanoseconds duration) {
  char out[32];
  std::snprintf(out, sizeof out, "%.6g ms", seconds(duration) * 1e3);
  return out;
}

/// What the profile wants to hear, for messages: the pattern and where it stands.
std::string expectation(const description::Exchange& exchange) {
  if (!exchange.answer) return "the echo of the request";
  std::string out = quoted(exchange.answer->source);
  if (const std::string place = exchange.answer->place.text(); !place.empty()) out += " (" + place + ")";
  return out;
}

}  // namespace

/// The request that waits for its answer.
struct Connection::Pending {
  const protocol::Request& request;
  const Accept& accept;
  bool expectEcho = false;
  bool done = false;
  Result<void> result{};
  Instant answered{};
  std::string garbage{};  ///< what came that was no answer, and what was expected
};

Connection::Connection(const description::Device& described, std::unique_ptr<transport::Stream> stream,
                       Clock& clock)
    : described_(described),
      stream_(std::move(stream)),
      clock_(clock),
      dialect_(described.profile),
      splitter_(dialect_.splitter()),
      ratio_(dialect_.inputs()),
      flags_(dialect_.inputs()) {
  if (described.profile->inputs) counter_ = protocol::FrameCounter(described.profile->inputs->counterBits);
}

std::string Connection::where() const {
  return "device " + described_.name + " (" + described_.port.text + ")";
}

// ---------------------------------------------------------------- reading

Task<void> Connection::startReader() {
  auto executor = co_await asio::this_coro::executor;
  auto self = shared_from_this();
  asio::co_spawn(
      executor, [self]() -> Task<void> { return self->readAll(); }, asio::detached);
}

Task<void> Connection::readAll() {
  auto self = shared_from_this();
  std::vector<std::byte> piece(kPiece);
  for (;;) {
    Result<std::size_t> count;
    try {
      count = co_await stream_->read(piece, Instant::max());
    } catch (const boost::system::system_error&) {
      count = fail(ErrorCode::cancelled, "reading was cancelled", stream_->name());
    }
    if (!count) {
      lose(std::move(count.error()));
      co_return;
    }
    consume(ByteView(piece).first(*count), clock_.now());
  }
}

void Connection::consume(ByteView bytes, Instant arrival) {
  inThisPiece_ = 0;
  splitter_.feed(bytes, [&](const protocol::LineSplitter::Line& line) { onLine(line, arrival); });
  if (inThisPiece_ > 1) queue_->spread(inThisPiece_, arrival, period_);
  if (inThisPiece_ > 0) arrived_.notifyAll();
}

void Connection::onLine(const protocol::LineSplitter::Line& line, Instant arrival) {
  if (line.droppedBytes == 0) {
    onText(line.text, arrival);
    return;
  }
  ++strays_.unknown;
  if (streaming_) queue_->noteDamaged(1);
  if (pending_) {
    pending_->garbage = "a line of " + std::to_string(line.text.size() + line.droppedBytes) +
                        " bytes, longer than " + std::to_string(profile().protocol.longestLine) +
                        ", that begins " + quoted(line.text, 40);
  }
}

void Connection::onText(std::string_view line, Instant arrival) {
  const protocol::Request* asked = pending_ ? &pending_->request : owed_ ? &owed_->request : nullptr;
  if (asked && profile().protocol.echo) {
    bool& expected = pending_ ? pending_->expectEcho : owed_->expectEcho;
    const bool before = expected;
    line = dialect_.withoutEcho(line, *asked, expected);
    if (before && !expected && pending_ && !asked->wantsAnswer()) finish(*pending_, {}, arrival);
  }
  if (line.empty()) return;  // blank lines say nothing

  const Incoming incoming = dialect_.classify(line, asked, ratio_, flags_);
  if (incoming.kind == Incoming::Kind::stream || incoming.kind == Incoming::Kind::damaged_stream) {
    if (!streaming_) {
      ++strays_.leftover;
    } else if (incoming.kind == Incoming::Kind::stream) {
      onSamples(incoming, arrival);
    } else {
      queue_->noteDamaged(1);
    }
  } else if (pending_) {
    onOther(incoming, line, arrival);
  } else {
    onNotAwaited(incoming, line);
  }
}

/// A line that is no sample while a request waits.
void Connection::onOther(const Incoming& incoming, std::string_view line, Instant arrival) {
  Pending& pending = *pending_;
  switch (incoming.kind) {
    case Incoming::Kind::device_error: {
      std::string text = "the device answered with an error";
      if (!incoming.code.empty()) text += " " + incoming.code;
      if (!incoming.text.empty()) text += ": " + incoming.text;
      finish(pending, fail(ErrorCode::device_error, text + " (" + quoted(line) + ")"), arrival);
      return;
    }
    case Incoming::Kind::answer: {
      Result<void> accepted = pending.accept ? pending.accept(dialect_) : Result<void>{};
      if (!accepted) {
        accepted.error().message +=
            " in " + quoted(line) + "; expected " + expectation(*pending.request.exchange);
      }
      finish(pending, std::move(accepted), arrival);
      return;
    }
    default:
      break;
  }
  pending.garbage = incoming.problem;
  ++strays_.unknown;
  const bool mayStream = profile().inputs && profile().inputs->streams();
  if (streaming_) queue_->noteDamaged(1);
  // Where nothing streams and no echo is due, a damaged line can only have been the answer: no need to wait
  // on.
  if (incoming.kind == Incoming::Kind::damaged && !pending.expectEcho && !mayStream &&
      pending.request.wantsAnswer()) {
    finish(pending, fail(ErrorCode::bad_answer, incoming.problem), arrival);
  }
  pending.expectEcho = pending.expectEcho && incoming.kind != Incoming::Kind::damaged;
}

void Connection::onNotAwaited(const Incoming& incoming, std::string_view line) {
  const bool answers =
      incoming.kind == Incoming::Kind::answer || incoming.kind == Incoming::Kind::device_error;
  if (owed_ && (answers || incoming.kind == Incoming::Kind::damaged)) {
    ++strays_.late;
    owed_.reset();
    progress_.notifyAll();
    return;
  }
  ++strays_.unknown;
  strays_.last = line.substr(0, 200);
  if (streaming_ && !answers) queue_->noteDamaged(1);
}

void Connection::onSamples(const Incoming& incoming, Instant arrival) {
  if (profile().inputs->counterBits > 0) {
    const auto restarts = counter_.restarts();
    queue_->noteLost(counter_.next(incoming.counter));
    // How many frames are gone nobody knows; that some are must be seen.
    if (counter_.restarts() != restarts) queue_->noteDamaged(1);
  }
  queue_->push(arrival, ratio_, flags_);
  ++inThisPiece_;
}

void Connection::finish(Pending& pending, Result<void> result, Instant arrival) {
  pending_ = nullptr;
  pending.done = true;
  pending.result = std::move(result);
  pending.answered = arrival;
  strays_.last.clear();
  lastAnswer_ = arrival;
  progress_.notifyAll();
}

void Connection::lose(Error error) {
  if (!failure_) failure_ = std::move(error).wrap("the connection is lost", where());
  progress_.notifyAll();
  arrived_.notifyAll();
}

void Connection::close() {
  if (!failure_) failure_ = Error(ErrorCode::io, "the connection was closed", where());
  stream_->close();
  progress_.notifyAll();
  arrived_.notifyAll();
}

// ---------------------------------------------------------------- asking

Task<Result<Connection::Times>> Connection::ask(const description::Exchange& exchange,
                                                std::vector<protocol::Value> values, Accept accept) {
  auto self = shared_from_this();
  auto request = dialect_.request(exchange, values);
  if (!request)
    co_return std::unexpected(std::move(request.error()).wrap("the request cannot be made", where()));
  auto turn = co_await turn_.lock();
  const int tries = 1 + std::max(0, profile().protocol.retries);
  for (int k = 1;; ++k) {
    auto done = co_await attempt(*request, accept);
    if (done) co_return done;
    Error error = std::move(done.error());
    const bool again = error.code == ErrorCode::timeout || error.code == ErrorCode::bad_answer;
    // A request that was cut off is not sent again: its beginning may have been taken for another one, and only the
    // caller knows what to do about that.
    if (again && k < tries && !failure_ && !torn_) continue;
    if (again && tries > 1) error.message += " (tried " + std::to_string(k) + " times)";
    error.where = where() + ", request " + quoted(request->text);
    co_return std::unexpected(std::move(error));
  }
}

Task<Result<Connection::Times>> Connection::attempt(const protocol::Request& request, const Accept& accept) {
  const auto& protocol = profile().protocol;
  if (torn_) {
    if (auto ended = co_await endTornRequest(request); !ended) co_return std::unexpected(std::move(ended.error()));
  }
  if (owed_) co_await awaitQuiet();
  if (lastAnswer_ != Instant::min() && clock_.now() < lastAnswer_ + protocol.gap) {
    const Instant free = lastAnswer_ + protocol.gap;
    co_await waitUntil(clock_, free);
  }
  if (failure_) co_return std::unexpected(*failure_);

  Pending pending{.request = request, .accept = accept, .expectEcho = protocol.echo};
  const bool waits = request.wantsAnswer() || protocol.echo;
  // However this ends, the reader must not find a pending request that is gone; an answer that may still come
  // is owed, and must not be taken for the answer to the next request.
  struct Guard {
    Connection& connection;
    Pending& pending;
    bool waits;
    Instant sent;
    bool whole = false;  ///< all of the request went out
    ~Guard() {
      connection.pending_ = nullptr;
      if (!whole) connection.torn_ = true;
      if (!waits || pending.done) return;
      const Nanoseconds timeout = connection.profile().protocol.timeout;
      connection.owed_ = Owed{pending.request, pending.expectEcho, sent + timeout + timeout / 2};
    }
  };
  Guard guard{*this, pending, waits, clock_.now()};
  pending_ = &pending;
  const Instant writeBy = clock_.now() + protocol.timeout;
  auto written = co_await stream_->write(request.bytes, writeBy);
  const Instant sent = guard.sent = clock_.now();
  guard.whole = written.has_value();
  if (!written) {
    co_return std::unexpected(std::move(written.error()).wrap("the request could not be sent"));
  }
  if (!waits) {
    lastAnswer_ = sent;
    pending.done = true;
    co_return Times{sent, sent};
  }
  const Instant deadline = sent + protocol.timeout;
  while (!pending.done && !failure_) {
    const bool heard = co_await progress_.wait(clock_, deadline);
    if (!heard) break;
  }
  if (pending.done) {
    if (!pending.result) co_return std::unexpected(std::move(pending.result.error()));
    co_return Times{sent, pending.answered};
  }
  if (failure_) co_return std::unexpected(*failure_);
  co_return std::unexpected(silence(pending));
}

/// Ends a request that was cut off while it was written, so that the device does not take the next one for its
/// rest, and leaves it the time to answer to that.
Task<Result<void>> Connection::endTornRequest(const protocol::Request& next) {
  const auto& protocol = profile().protocol;
  const Bytes end(bytesOf(protocol.requestEnd).begin(), bytesOf(protocol.requestEnd).end());
  const Instant writeBy = clock_.now() + protocol.timeout;
  auto written = co_await stream_->write(end, writeBy);
  if (!written) co_return std::unexpected(std::move(written.error()).wrap("a request that was cut off could not be ended"));
  torn_ = false;
  owed_ = Owed{next, protocol.echo, clock_.now() + protocol.timeout};
  co_return Result<void>{};
}

Task<void> Connection::awaitQuiet() {
  while (owed_ && !failure_) {
    const Instant until = owed_->until;
    const bool heard = co_await progress_.wait(clock_, until);
    if (!heard) break;
  }
  owed_.reset();
  // The rest of a line that broke off must not be put before the next answer.
  if (!streaming_) strays_.dropped += splitter_.dropPartial();
}

Error Connection::silence(const Pending& pending) {
  const std::string limit = milliseconds(profile().protocol.timeout);
  const std::string wanted = "; expected " + expectation(*pending.request.exchange);
  const std::string unasked = strays_.last.empty() ? "" : "; unasked it had sent " + quoted(strays_.last);
  if (!pending.garbage.empty()) {
    const std::string& garbage = pending.garbage;
    return {ErrorCode::bad_answer,
            "no answer that the profile describes in " + limit + ": " + garbage +
                (garbage.starts_with("expected ") ? "" : wanted) + unasked,
            {},
            "compare the answer with the profile, and check baud rate, parity and terminators"};
  }
  if (const auto partial = splitter_.partial(); !partial.empty() && !streaming_) {
    return {ErrorCode::timeout,
            "half an answer in " + limit + ": got " + quoted(partial) + " without the end " +
                quoted(profile().protocol.answerEnd) + wanted + unasked,
            {},
            "check the profile's answer_end, or give it a longer timeout"};
  }
  if (pending.request.wantsAnswer() && profile().protocol.echo && !pending.expectEcho) {
    return {ErrorCode::timeout,
            "the echo came, but no answer in " + limit + wanted + unasked,
            {},
            "give the profile a longer timeout"};
  }
  return {ErrorCode::timeout,
          "no answer in " + limit + ": nothing came" + wanted + unasked,
          {},
          "check that the device is on, its cable and address, and the profile's terminators and timeout"};
}

// ---------------------------------------------------------------- samples

void Connection::openQueue(std::size_t limit, Nanoseconds period, bool streaming) {
  queue_.emplace(dialect_.inputs(), limit);
  period_ = period;
  streaming_ = streaming;
  counter_.reset();
}

void Connection::closeQueue() {
  streaming_ = false;
  arrived_.notifyAll();
}

}  // namespace shuntwright::device
