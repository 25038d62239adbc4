#pragma once

#include <cstdint>
#include <functional>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "driver/core/async.h"
#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/core/task.h"
#include "driver/description/rack.h"
#include "driver/device/sample_queue.h"
#include "driver/protocol/frame_counter.h"
#include "driver/protocol/text_dialect.h"
#include "driver/transport/stream.h"

namespace shuntwright::device {

/// What came over a connection that was neither sample nor awaited answer.
struct Strays {
  std::uint64_t late = 0;      ///< answers that came after their request had been given up
  std::uint64_t leftover = 0;  ///< lines of samples while none were asked for
  std::uint64_t unknown = 0;   ///< anything else
  std::uint64_t dropped = 0;   ///< bytes of half lines that were given up
  std::string last;            ///< the last unknown line since a request was answered
};

/// One device's wire: a reader that takes lines apart, one request at a time, and the samples that stream.
///
/// Shared by the device and its coroutines, so that it outlives whichever ends first. One thread.
class Connection : public std::enable_shared_from_this<Connection> {
 public:
  /// When a request went out and its answer came.
  struct Times {
    Instant sent;
    Instant answered;
    Instant middle() const { return sent + (answered - sent) / 2; }
  };
  /// Looks at an answer that has the right form; an error makes it a damaged answer. May be empty.
  using Accept = std::function<Result<void>(const protocol::TextDialect& dialect)>;

  Connection(const description::Device& described, std::unique_ptr<transport::Stream> stream, Clock& clock);

  /// Spawns the reader on the executor of the coroutine that awaits this.
  Task<void> startReader();

  /// Sends a request and awaits its echo and answer, trying again as the profile says after a time-out or a
  /// damaged answer. Requests of several coroutines are taken one after the other.
  Task<Result<Times>> ask(const description::Exchange& exchange, std::vector<protocol::Value> values = {},
                          Accept accept = {});

  void close();

  // ---- samples
  void openQueue(std::size_t limit, Nanoseconds period, bool streaming);
  void closeQueue();
  SampleQueue* queue() { return queue_ ? &*queue_ : nullptr; }
  Event& arrived() { return arrived_; }  ///< samples, or a failure
  const std::optional<Error>& failure() const { return failure_; }

  const Strays& strays() const { return strays_; }
  const description::Device& described() const { return described_; }
  const description::Profile& profile() const { return *described_.profile; }
  Clock& clock() { return clock_; }
  std::string where() const;  ///< "device amp1 (tcp:127.0.0.1:5101)"

 private:
  struct Pending;
  /// A request that was given up: its answer may still come, and must not be taken for another's.
  struct Owed {
    protocol::Request request;
    bool expectEcho;
    Instant until;
  };

  Task<void> readAll();
  void consume(ByteView bytes, Instant arrival);
  void onLine(const protocol::LineSplitter::Line& line, Instant arrival);
  void onText(std::string_view line, Instant arrival);
  void onSamples(const protocol::Incoming& incoming, Instant arrival);
  void onOther(const protocol::Incoming& incoming, std::string_view line, Instant arrival);
  void onNotAwaited(const protocol::Incoming& incoming, std::string_view line);
  void finish(Pending& pending, Result<void> result, Instant arrival);
  void lose(Error error);

  Task<Result<Times>> attempt(const protocol::Request& request, const Accept& accept);
  Task<void> awaitQuiet();
  Task<Result<void>> endTornRequest(const protocol::Request& next);
  Error silence(const Pending& pending);

  const description::Device described_;
  std::unique_ptr<transport::Stream> stream_;
  Clock& clock_;
  protocol::TextDialect dialect_;
  protocol::LineSplitter splitter_;
  AsyncMutex turn_;
  Event progress_;  ///< the pending request went on, or an owed answer came
  Pending* pending_ = nullptr;
  std::optional<Owed> owed_;
  bool torn_ = false;  ///< the device may hold the beginning of a request whose rest was never sent
  Instant lastAnswer_ = Instant::min();
  std::optional<Error> failure_;
  Strays strays_;

  std::optional<SampleQueue> queue_;
  Event arrived_;
  bool streaming_ = false;
  Nanoseconds period_{0};
  std::size_t inThisPiece_ = 0;
  protocol::FrameCounter counter_;
  std::vector<float> ratio_;  ///< one frame, used again
  std::vector<std::uint8_t> flags_;
};

}  // namespace shuntwright::device
