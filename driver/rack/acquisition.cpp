#include "driver/rack/acquisition.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/cancellation_state.hpp>
#include <boost/asio/this_coro.hpp>
#include <memory>
#include <optional>

#include "driver/core/async.h"

namespace shuntwright::rack {

namespace asio = boost::asio;

namespace {

struct Amplifier {
  std::string name;
  device::Device* device = nullptr;
  bool running = false;
};

/// Marks samples that a relay may have touched. Which channel a relay really reaches is not certain (that is
/// what calibration is for), so every channel is marked.
class SwitchingMarks {
 public:
  explicit SwitchingMarks(LiveRack& live) : live_(live) {
    for (const auto& described : live.described().devices) {
      if (const auto& relays = described.profile->relays) settle_ = std::max(settle_, relays->releaseTime);
    }
    Nanoseconds filter{0};
    for (const auto& described : live.described().devices) {
      if (const auto& inputs = described.profile->inputs) filter = std::max(filter, 14 * inputs->filterTimeConstant);
    }
    settle_ += filter;
  }

  void mark(device::SampleBlock& block) {
    const auto lastClosed = live_.relays().lastClosed();
    if (!lastClosed) return;
    for (std::size_t frame = 0; frame < block.frames(); ++frame) {
      if (block.time[frame] > *lastClosed + settle_) continue;
      for (std::size_t k = 0; k < block.inputs; ++k) block.flags[frame * block.inputs + k] |= device::kSwitching;
    }
  }

 private:
  LiveRack& live_;
  Nanoseconds settle_{0};
};

struct Run {
  LiveRack& live;
  AcquisitionSink& sink;
  const std::function<bool()>& stopWanted;
  SwitchingMarks marks;
};

Task<void> runAmplifier(Run& run, Amplifier& amplifier) {
  Clock& clock = run.live.clock();
  bool faulty = false;
  const auto report = [&](const Error& error) {
    if (!faulty && run.sink.fault) run.sink.fault(amplifier.name, error);
    faulty = true;
  };
  while (!run.stopWanted()) {
    if (!amplifier.running) {
      auto started = co_await amplifier.device->start(LiveRack::rateOf(amplifier.device->described()));
      if (!started) {
        report(started.error());
        for (int k = 0; k < 2 && !run.stopWanted(); ++k) co_await waitFor(clock, std::chrono::milliseconds(500));
        continue;
      }
      amplifier.running = true;
    }
    const auto period = fromSeconds(1 / LiveRack::rateOf(amplifier.device->described()).in(units::hertz));
    // Silence is a fault after two seconds (or three samples of a slow device); asked to stop is noticed sooner.
    const Instant silent = clock.now() + std::max<Nanoseconds>(std::chrono::seconds(2), 3 * period);
    Result<device::SampleBlock> block = fail(ErrorCode::timeout, "no samples came");
    while (!run.stopWanted()) {
      const Instant soon = std::min(silent, clock.now() + std::chrono::milliseconds(500));
      block = co_await amplifier.device->next(soon);
      if (block || block.error().code != ErrorCode::timeout || clock.now() >= silent) break;
    }
    if (!block) {
      if (run.stopWanted()) break;
      report(block.error());
      auto stopped = co_await amplifier.device->stop();
      (void)stopped;  // it is silent already
      amplifier.running = false;
      for (int k = 0; k < 2 && !run.stopWanted(); ++k) co_await waitFor(clock, std::chrono::milliseconds(500));
      continue;
    }
    if (faulty && run.sink.recovered) run.sink.recovered(amplifier.name);
    faulty = false;
    run.marks.mark(*block);
    if (run.sink.block) run.sink.block(amplifier.name, *block);
  }
}

}  // namespace

Task<Result<void>> acquire(LiveRack& live, LoadPathPermit, AcquisitionSink sink, std::function<bool()> stopWanted) {
  std::vector<std::unique_ptr<Amplifier>> amplifiers;
  for (const auto& described : live.described().devices) {
    if (!described.profile->inputs) continue;
    auto amplifier = std::make_unique<Amplifier>();
    amplifier->name = described.name;
    amplifier->device = &live.device(described.name);
    amplifiers.push_back(std::move(amplifier));
  }
  if (amplifiers.empty()) co_return fail(ErrorCode::bad_use, "the rack has no amplifier", live.described().file);

  Run run{live, sink, stopWanted, SwitchingMarks(live)};
  std::optional<Error> first;
  std::exception_ptr thrown;
  try {
    // A first start that fails for all of them is an error, not a recording.
    for (auto& amplifier : amplifiers) {
      auto started = co_await amplifier->device->start(LiveRack::rateOf(amplifier->device->described()));
      amplifier->running = started.has_value();
      if (!started && !first) first = std::move(started.error());
    }
    const bool any = std::any_of(amplifiers.begin(), amplifiers.end(), [](const auto& a) { return a->running; });
    if (!any) co_return std::unexpected(std::move(*first));
    std::vector<std::function<Task<void>()>> bodies;
    for (auto& amplifier : amplifiers) {
      bodies.push_back([&run, one = amplifier.get()]() -> Task<void> { return runAmplifier(run, *one); });
    }
    co_await whenAll(std::move(bodies));
    // What has come and nobody has asked for, and the gap at the very end.
    for (auto& amplifier : amplifiers) {
      device::SampleBlock rest = amplifier->device->rest();
      run.marks.mark(rest);
      const bool something = rest.frames() > 0 || rest.lostBefore > 0 || rest.damagedBefore > 0;
      if (something && sink.block) sink.block(amplifier->name, rest);
    }
  } catch (...) {
    thrown = std::current_exception();
  }
  // Those that were cancelled while they started, too: stopping what does not run does nothing.
  co_await asio::this_coro::reset_cancellation_state(asio::disable_cancellation());
  for (auto& amplifier : amplifiers) {
    auto stopped = co_await amplifier->device->stop();
    (void)stopped;  // nothing depends on it any more
  }
  co_await asio::this_coro::reset_cancellation_state(asio::enable_terminal_cancellation());
  if (thrown) std::rethrow_exception(thrown);
  co_return Result<void>{};
}

}  // namespace shuntwright::rack
