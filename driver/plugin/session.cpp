#include "driver/plugin/session.h"

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/error.hpp>
#include <boost/asio/executor_work_guard.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/post.hpp>
#include <boost/system/system_error.hpp>
#include <algorithm>
#include <atomic>
#include <chrono>
#include <condition_variable>
#include <deque>
#include <exception>
#include <future>
#include <limits>
#include <map>
#include <mutex>
#include <thread>

#include "driver/calibration/basis.h"
#include "driver/calibration/record_json.h"
#include "driver/description/load.h"
#include "driver/rack/acquisition.h"
#include "driver/rack/live_rack.h"
#include "driver/transport/port_opener.h"
#include "driver/transport/replay_stream.h"
#include "driver/transport/trace.h"

namespace shuntwright::plugin {

namespace asio = boost::asio;

namespace {
constexpr std::size_t kQueuedSeconds = 10;

Result<void> errorOf(std::exception_ptr thrown) {
  try {
    std::rethrow_exception(thrown);
  } catch (const boost::system::system_error& e) {
    if (e.code() == asio::error::operation_aborted) return fail(ErrorCode::cancelled, "the host has cancelled it");
    return fail(ErrorCode::io, e.what());
  } catch (const std::exception& e) {
    return fail(ErrorCode::io, e.what());
  } catch (...) {
    return fail(ErrorCode::io, "something unknown was thrown");
  }
}

Error notOpen() { return Error(ErrorCode::bad_use, "the session is not open", {}, "call open first"); }
}  // namespace

/// The session's thread and what lives on it.
struct Session::Thread {
  explicit Thread(const description::Rack& r) : rack(r) {}

  const description::Rack& rack;
  asio::io_context context;
  std::unique_ptr<Clock> clock;
  VirtualClock* virtualClock = nullptr;  ///< while replaying
  std::unique_ptr<rack::RelayJournal> journal;
  std::unique_ptr<rack::LiveRack> live;
  std::map<std::string, correction::LiveCorrection> corrections;
  std::thread worker;
  std::atomic<bool> ending{false};

  // Acquisition.
  std::atomic<bool> stopWanted{false};
  bool running = false;
  std::future<Result<void>> acquisition;

  BlockQueue blocks;

  void run() {
    if (!virtualClock) {
      auto work = asio::make_work_guard(context);
      while (!ending) context.run_for(std::chrono::milliseconds(50));
      return;
    }
    // In virtual time the thread runs while there is something to do and then waits for the next call.
    while (!ending) {
      context.restart();
      bool busy = false;
      while (context.poll() > 0) busy = true;
      if (hold()) continue;
      if (pending > 0 && virtualClock->advance()) busy = true;
      if (!busy) std::this_thread::sleep_for(std::chrono::microseconds(200));
    }
  }

  /// In virtual time nothing is dropped: the thread waits until the host has read.
  bool hold() { return !stopWanted && !ending && blocks.waitForRoom(); }

  std::atomic<int> pending{0};
  asio::cancellation_signal abort;  ///< of calibrations; used on the thread only, like the next
  bool calibrating = false;

  /// Runs a coroutine on the thread; the future is ready when it has ended. Exceptions become errors.
  /// @param abortable  `abort` ends it
  std::future<Result<void>> spawn(std::function<Task<Result<void>>()> body, bool abortable = false) {
    auto promise = std::make_shared<std::promise<Result<void>>>();
    auto future = promise->get_future();
    ++pending;
    struct Wrap {
      static Task<void> run(std::function<Task<Result<void>>()> inner, std::shared_ptr<Result<void>> out) {
        *out = co_await inner();
      }
    };
    auto out = std::make_shared<Result<void>>();
    asio::post(context, [this, promise, out, abortable, body = std::move(body)] {
      auto ended = [this, promise, out](std::exception_ptr e) {
        --pending;
        promise->set_value(e ? errorOf(e) : std::move(*out));
      };
      auto run = [body, out]() -> Task<void> { return Wrap::run(body, out); };
      if (abortable) {
        asio::co_spawn(context, run, asio::bind_cancellation_slot(abort.slot(), ended));
      } else {
        asio::co_spawn(context, run, ended);
      }
    });
    return future;
  }

  void push(const std::string& device, device::SampleBlock& samples) {
    auto block = std::make_unique<Block>();
    block->device = device;
    block->samples = std::move(samples);
    block->corrected.assign(block->samples.ratio.size(), std::numeric_limits<float>::quiet_NaN());
    if (const auto found = corrections.find(device); found != corrections.end()) {
      found->second.apply(block->samples, block->corrected);
    }
    block->lost = block->samples.lostBefore;
    block->damaged = block->samples.damagedBefore;
    const double rate_Hz = rack::LiveRack::rateOf(*rack.device(device)).in(units::hertz);
    const bool keepAll = virtualClock != nullptr;
    blocks.push(std::move(block), keepAll ? std::numeric_limits<std::size_t>::max()
                                          : std::max<std::size_t>(1, static_cast<std::size_t>(kQueuedSeconds * rate_Hz)));
  }
};

Session::Session(SessionOptions options) : options_(std::move(options)) {}

Session::~Session() {
  if (!thread_) return;
  if (thread_->worker.joinable()) {
    (void)stop();
    if (thread_->live && !thread_->live->relays().maybeClosed().empty()) (void)release();
    Thread* t = thread_.get();
    struct Close {
      static Task<Result<void>> run(Thread* thread) {
        if (thread->live) thread->live->close();
        co_return Result<void>{};
      }
    };
    t->spawn([t]() -> Task<Result<void>> { return Close::run(t); }).wait();
    t->ending = true;
    t->worker.join();
  }
}

const description::Rack* Session::rack() const { return rack_ ? &*rack_ : nullptr; }

Result<void> Session::open() {
  description::Diagnostics diagnostics;
  rack_ = description::loadRack(options_.rackFile, description::diskReader(), diagnostics);
  if (!rack_) return fail(ErrorCode::bad_file, diagnostics.render(false));
  thread_ = std::make_unique<Thread>(*rack_);
  Thread& t = *thread_;
  transport::Opener opener;
  rack::LiveRackOptions liveOptions;
  const auto traced = transport::replayStart(*rack_);
  if (!traced) return std::unexpected(traced.error());
  if (options_.replayFile.empty() && *traced) {
    auto clock = std::make_unique<VirtualClock>(**traced);
    t.virtualClock = clock.get();
    t.clock = std::move(clock);
    opener = transport::portOpener(*t.clock);
    t.journal = std::make_unique<rack::MemoryJournal>();
  } else if (!options_.replayFile.empty()) {
    auto trace = transport::loadTrace(options_.replayFile);
    if (!trace) return std::unexpected(std::move(trace.error()));
    auto clock = std::make_unique<VirtualClock>(trace->start);
    t.virtualClock = clock.get();
    t.clock = std::move(clock);
    opener = transport::replayOpener(std::move(*trace), options_.replayFile, *t.clock);
    t.journal = std::make_unique<rack::MemoryJournal>();
  } else {
    t.clock = std::make_unique<RealClock>(t.context);
    opener = transport::portOpener(*t.clock);
    liveOptions.lockFolder = options_.lockFolder;
    if (options_.stateFolder.empty()) {
      t.journal = std::make_unique<rack::MemoryJournal>();
    } else {
      auto journal = rack::FileJournal::open(rack::journalPath(options_.stateFolder, *rack_));
      if (!journal) return std::unexpected(std::move(journal.error()));
      t.journal = std::move(*journal);
    }
  }
  t.worker = std::thread([&t] { t.run(); });
  struct Open {
    static Task<Result<void>> run(Thread* thread, transport::Opener with, rack::LiveRackOptions options) {
      auto live = co_await rack::LiveRack::open(thread->rack, with, *thread->clock, *thread->journal, options);
      if (!live) co_return std::unexpected(std::move(live.error()));
      thread->live = std::move(*live);
      co_return Result<void>{};
    }
  };
  Thread* pointer = &t;
  return t.spawn([pointer, opener, liveOptions]() -> Task<Result<void>> { return Open::run(pointer, opener, liveOptions); }).get();
}

Result<void> Session::calibrate(std::function<void(const calibration::Progress&)> progress, std::string& recordJson) {
  if (!thread_ || !thread_->live) return std::unexpected(notOpen());
  if (thread_->running) return fail(ErrorCode::bad_use, "samples are being read", {}, "call stop first");
  auto permit = rack::confirmLoadPath(*rack_, options_.isolated, "plug-in host");
  if (!permit) return std::unexpected(std::move(permit.error()));

  // Progress crosses over to the calling thread.
  std::mutex mutex;
  std::condition_variable heard;
  const bool patient = thread_->virtualClock != nullptr;  // virtual time waits for the host, real devices do not
  std::deque<calibration::Progress> told;
  calibration::Options wanted;
  wanted.progress = [&](const calibration::Progress& p) {
    std::unique_lock lock(mutex);
    told.push_back(p);
    if (patient) heard.wait(lock, [&] { return told.empty(); });
  };
  const std::uint64_t seed = options_.seed != 0
                                 ? options_.seed
                                 : static_cast<std::uint64_t>(thread_->clock->now().time_since_epoch().count());
  auto record = std::make_shared<Result<calibration::Record>>(fail(ErrorCode::cancelled, "it did not end"));
  struct Run {
    static Task<Result<void>> run(Thread* thread, rack::LoadPathPermit permit, std::uint64_t seed,
                                  calibration::Options options, std::shared_ptr<Result<calibration::Record>> out) {
      Random random(seed);
      thread->calibrating = true;
      struct Ended {
        Thread* thread;
        ~Ended() { thread->calibrating = false; }
      } ended{thread};
      *out = co_await calibration::calibrate(*thread->live, permit, random, options);
      co_return Result<void>{};
    }
  };
  Thread* t = thread_.get();
  auto done = t->spawn([t, permit = *permit, seed, wanted, record]() -> Task<Result<void>> {
    return Run::run(t, permit, seed, wanted, record);
  }, true);
  std::exception_ptr thrown;  // by the host; what the thread still uses must stay until it has ended
  const auto tell = [&] {
    std::deque<calibration::Progress> now;
    {
      const std::lock_guard lock(mutex);
      now = told;
    }
    try {
      for (const auto& p : now) {
        if (progress && !thrown) progress(p);
      }
    } catch (...) {
      thrown = std::current_exception();
      cancel();
    }
    const std::lock_guard lock(mutex);
    told.erase(told.begin(), told.begin() + static_cast<std::ptrdiff_t>(now.size()));
    heard.notify_one();
  };
  while (done.wait_for(std::chrono::microseconds(patient ? 100 : 5000)) != std::future_status::ready) tell();
  tell();
  auto ended = done.get();
  if (thrown) std::rethrow_exception(thrown);
  if (!ended) {
    const auto left = t->live->relays().maybeClosed();
    for (const auto& relay : left) ended.error().message += "; relay " + rack::text(relay) + " may still be closed";
    if (!left.empty()) ended.error().remedy = "call release";
    return ended;
  }
  if (!*record) return std::unexpected(std::move(record->error()));
  recordJson = calibration::recordJson(**record);
  return use(std::move(**record));
}

void Session::cancel() {
  if (!thread_) return;
  Thread* t = thread_.get();
  asio::post(t->context, [t] {
    if (t->calibrating) t->abort.emit(asio::cancellation_type::terminal);
  });
}

Result<void> Session::use(calibration::Record record) {
  if (!thread_ || !thread_->live) return std::unexpected(notOpen());
  if (thread_->running) return fail(ErrorCode::bad_use, "samples are being read", {}, "call stop first");
  if (auto holds = calibration::stillHolds(record, *rack_); !holds) return holds;
  if (auto same = calibration::sameDevices(record, *thread_->live); !same) return same;
  std::map<std::string, correction::LiveCorrection> corrections;
  for (const auto& device : rack_->devices) {
    if (!device.profile->inputs) continue;
    auto correction = correction::LiveCorrection::of(*rack_, record, device.name);
    if (!correction) return std::unexpected(std::move(correction.error()));
    corrections.emplace(device.name, std::move(*correction));
  }
  record_ = std::move(record);
  thread_->corrections = std::move(corrections);
  return {};
}

Result<void> Session::start() {
  if (!thread_ || !thread_->live) return std::unexpected(notOpen());
  if (thread_->running) return fail(ErrorCode::bad_use, "samples are being read already");
  // Starting sets the devices' rates.
  auto permit = rack::confirmLoadPath(*rack_, options_.isolated, "plug-in host");
  if (!permit) return std::unexpected(std::move(permit.error()));
  Thread* t = thread_.get();
  t->stopWanted = false;
  t->blocks.clear();
  current_.reset();
  struct Acquire {
    static Task<Result<void>> run(Thread* thread, rack::LoadPathPermit permit) {
      rack::AcquisitionSink sink;
      sink.block = [thread](const std::string& device, device::SampleBlock& block) { thread->push(device, block); };
      const std::function<bool()> stop = [thread] { return thread->stopWanted.load(); };
      // However it ends, a host that waits for samples is told.
      try {
        auto done = co_await rack::acquire(*thread->live, permit, sink, stop);
        if (!done) thread->blocks.end(done.error());
        co_return done;
      } catch (...) {
        thread->blocks.end(errorOf(std::current_exception()).error());
        throw;
      }
    }
  };
  t->running = true;
  t->acquisition = t->spawn([t, permit = *permit]() -> Task<Result<void>> { return Acquire::run(t, permit); });
  return {};
}

Result<Block*> Session::next(std::uint32_t timeout_ms) {
  if (!thread_ || !thread_->live) return std::unexpected(notOpen());
  if (current_ && current_->taken < current_->samples.frames()) return current_.get();
  // After stop() comes what was queued by then.
  auto block = thread_->blocks.take(std::chrono::milliseconds(thread_->running ? timeout_ms : 0));
  if (!block && !thread_->running) return fail(ErrorCode::bad_use, "no samples are being read", {}, "call start first");
  if (!block) return std::unexpected(std::move(block.error()));
  current_ = std::move(*block);
  return current_.get();
}

Result<void> Session::stop() {
  if (!thread_ || !thread_->running) return {};
  thread_->stopWanted = true;
  thread_->blocks.wake();
  auto done = thread_->acquisition.get();
  thread_->running = false;
  return done;
}

Result<void> Session::release() {
  if (!thread_ || !thread_->live) return std::unexpected(notOpen());
  struct Open {
    static Task<Result<void>> run(Thread* thread) { co_return co_await thread->live->relays().openEvery(); }
  };
  Thread* t = thread_.get();
  return t->spawn([t]() -> Task<Result<void>> { return Open::run(t); }).get();
}

}  // namespace shuntwright::plugin
