#include "driver/transport/replay_stream.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <map>
#include <optional>

#include "driver/core/async.h"

namespace shuntwright::transport {

namespace {

/// One session of one device, from its opening to its end.
struct Session {
  std::vector<TraceEvent> events;
  std::string device;
  std::string file;
};

/// Where a session stands. Shared with pending reads.
struct Playing {
  explicit Playing(std::shared_ptr<const Session> what, Instant opened) : session(std::move(what)) {
    times.assign(session->events.size(), Instant::max());
    times.front() = opened;
  }

  std::shared_ptr<const Session> session;
  std::size_t nextRead = 1;    ///< event from which the next read is looked for
  std::size_t nextWrite = 1;   ///< event from which the next write is looked for
  std::size_t taken = 0;       ///< bytes of the event at nextRead that were read
  std::vector<Instant> times;  ///< when each event was played; max: not yet
  bool closed = false;
  std::optional<Error> broken;
  Event changed;

  std::string place(std::size_t event) const {
    return Place{session->file, session->events[event].line, 0}.text() + ", device " + session->device;
  }
};

class ReplayStream final : public Stream {
 public:
  ReplayStream(std::shared_ptr<const Session> session, Clock& clock)
      : clock_(clock), playing_(std::make_shared<Playing>(std::move(session), clock.now())) {}
  ~ReplayStream() override { close(); }

  Task<Result<std::size_t>> read(std::span<std::byte> into, Instant deadline) override {
    const auto playing = playing_;
    Clock& clock = clock_;
    for (;;) {
      if (playing->closed) co_return fail(ErrorCode::io, "the connection was closed", playing->session->file);
      if (playing->broken) co_return std::unexpected(*playing->broken);
      const Instant due = dueOfNextRead(*playing);
      if (due <= clock.now()) break;
      const Instant until = std::min(due, deadline);
      const bool woken = co_await playing->changed.wait(clock, until);
      if (!woken && until == deadline && until < due) {
        co_return fail(ErrorCode::timeout, "nothing came in time", playing->session->file);
      }
    }
    Playing& now = *playing;
    const TraceEvent& event = now.session->events[now.nextRead];
    now.times[now.nextRead] = std::min(clock.now(), now.times[now.nextRead]);
    if (event.kind == TraceEvent::Kind::failure) {
      now.broken = Error(ErrorCode::io, std::string(textOf(event.bytes)), now.place(now.nextRead));
      co_return std::unexpected(*now.broken);
    }
    const std::size_t count = std::min(into.size(), event.bytes.size() - now.taken);
    std::copy_n(event.bytes.begin() + static_cast<std::ptrdiff_t>(now.taken), count, into.begin());
    now.taken += count;
    if (now.taken == event.bytes.size()) {
      now.taken = 0;
      ++now.nextRead;
    }
    co_return count;
  }

  Task<Result<void>> write(ByteView bytes, Instant) override {
    Playing& now = *playing_;
    if (now.closed) co_return fail(ErrorCode::io, "the connection was closed", now.session->file);
    if (now.broken) co_return std::unexpected(*now.broken);
    const auto& events = now.session->events;
    while (now.nextWrite < events.size() && events[now.nextWrite].kind != TraceEvent::Kind::write)
      ++now.nextWrite;
    if (now.nextWrite == events.size()) {
      co_return breakOff(now,
                         "the driver writes " + quoted(bytes) + ", and the trace has nothing more written",
                         events.size() - 1);
    }
    const TraceEvent& event = events[now.nextWrite];
    if (!std::equal(bytes.begin(), bytes.end(), event.bytes.begin(), event.bytes.end())) {
      co_return breakOff(now,
                         "the driver writes " + quoted(bytes) + ", and the trace has " + quoted(event.bytes),
                         now.nextWrite);
    }
    now.times[now.nextWrite] = clock_.now();
    ++now.nextWrite;
    now.changed.notifyAll();
    co_return Result<void>{};
  }

  void close() override {
    playing_->closed = true;
    playing_->changed.notifyAll();
  }

  std::string name() const override { return "replay:" + playing_->session->file; }

 private:
  static std::unexpected<Error> breakOff(Playing& playing, std::string message, std::size_t event) {
    playing.broken = Error(ErrorCode::bad_use, std::move(message), playing.place(event),
                           "replay with the rack, profiles and options with which the trace was written");
    playing.changed.notifyAll();
    return std::unexpected(*playing.broken);
  }

  /// When what the device sent next is there: max when a write is still to come, or nothing more was sent.
  static Instant dueOfNextRead(Playing& playing) {
    const auto& events = playing.session->events;
    std::size_t& k = playing.nextRead;
    Instant earliest = Instant::min();
    for (; k < events.size(); ++k) {
      const auto kind = events[k].kind;
      if (kind == TraceEvent::Kind::read || kind == TraceEvent::Kind::failure) break;
      if (kind == TraceEvent::Kind::write && playing.times[k] == Instant::max()) return Instant::max();
      if (kind == TraceEvent::Kind::close) return Instant::max();
    }
    if (k == events.size()) return Instant::max();
    if (playing.taken > 0) return Instant::min();
    // Not before what was read last, and as long after the event before as when it was traced.
    for (std::size_t before = k; before-- > 0;) {
      if (events[before].kind != TraceEvent::Kind::write) {
        earliest = playing.times[before];
        break;
      }
    }
    const Instant due = playing.times[k - 1] + (events[k].offset - events[k - 1].offset);
    return std::max(due, earliest);
  }

  Clock& clock_;
  std::shared_ptr<Playing> playing_;
};

/// Sessions of each device that are still to be played.
struct Cassette {
  std::string file;
  std::map<std::string, std::vector<std::shared_ptr<const Session>>> sessions;
  std::map<std::string, std::size_t> played;
};

Task<Result<std::unique_ptr<Stream>>> openReplay(std::shared_ptr<Cassette> cassette, Clock* clock,
                                                 std::string device) {
  using Opened = Result<std::unique_ptr<Stream>>;
  const auto found = cassette->sessions.find(device);
  if (found == cassette->sessions.end()) {
    co_return Opened(
        fail(ErrorCode::not_found, "the trace has no device \"" + device + "\"", cassette->file));
  }
  std::size_t& next = cassette->played[device];
  if (next == found->second.size()) {
    co_return Opened(
        fail(ErrorCode::not_found,
             "the trace has " + std::to_string(next) + " sessions of device \"" + device + "\", and no more",
             cassette->file));
  }
  co_return Opened(std::make_unique<ReplayStream>(found->second[next++], *clock));
}

}  // namespace

Opener replayOpener(Trace trace, std::string file, Clock& clock) {
  auto cassette = std::make_shared<Cassette>();
  cassette->file = file;
  std::map<std::string, std::shared_ptr<Session>> current;
  for (TraceEvent& event : trace.events) {
    auto& session = current[event.device];
    if (event.kind == TraceEvent::Kind::open || !session) {
      session = std::make_shared<Session>();
      session->device = event.device;
      session->file = file;
      cassette->sessions[event.device].push_back(session);
      if (event.kind != TraceEvent::Kind::open) {
        TraceEvent opened = event;  // a trace that was cut at its front
        opened.kind = TraceEvent::Kind::open;
        opened.bytes.clear();
        session->events.push_back(std::move(opened));
      }
    }
    session->events.push_back(std::move(event));
  }
  return [cassette, clock = &clock](const description::Device& device) {
    return openReplay(cassette, clock, device.name);
  };
}

Result<Opener> replayOpener(const std::string& traceFile, Clock& clock) {
  auto trace = loadTrace(traceFile);
  if (!trace) return std::unexpected(std::move(trace.error()));
  return replayOpener(std::move(*trace), traceFile, clock);
}

}  // namespace shuntwright::transport
