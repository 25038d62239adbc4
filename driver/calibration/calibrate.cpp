#include "driver/calibration/calibrate.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/cancellation_state.hpp>
#include <boost/asio/this_coro.hpp>
#include <cmath>
#include <cstdio>
#include <map>
#include <memory>
#include <set>

#include "driver/core/async.h"
#include "driver/rack/certificates.h"

namespace shuntwright::calibration {

namespace asio = boost::asio;
using namespace units;
using description::Channel;
using description::Rack;

namespace {

/// One amplifier's share of the work.
struct Share {
  device::Device* amplifier = nullptr;
  std::vector<const Channel*> channels;
  std::map<std::string, ChannelReadings> readings;
  std::optional<Error> error;
};

struct Run {
  rack::LiveRack& live;
  rack::LoadPathPermit permit;
  const Options& options;
  int windowsDone = 0;
  int windowsPlanned = 0;
  Error* firstError = nullptr;
};

/// Measures the channels of one amplifier.
class Sequence {
 public:
  Sequence(Run& run, Share& share)
      : run_(run),
        share_(share),
        clock_(run.live.clock()),
        settings_(run.live.described().calibration),
        inputs_(*share.amplifier->described().profile->inputs),
        reader_(*share.amplifier, clock_, rack::LiveRack::rateOf(share.amplifier->described())) {}

  Task<Result<void>> all() {
    const auto rate = rack::LiveRack::rateOf(share_.amplifier->described());
    if (auto started = co_await share_.amplifier->start(rate); !started) co_return started;
    for (const Channel* channel : share_.channels) {
      auto& readings = share_.readings[channel->name];
      for (const auto& shunt : channel->shunts) {
        auto measured = co_await measure(*channel, shunt);
        if (!measured) {
          co_return std::unexpected(std::move(measured.error()).wrap("channel " + channel->name + " could not be calibrated"));
        }
        readings.shunts.push_back(std::move(*measured));
      }
      // A zero read through a shunt would be worse than none.
      if (maybeShunted(*channel)) continue;
      auto zero = co_await reader_.take(column(*channel), clock_.now(), settings_.windowSamples);
      if (!zero) co_return std::unexpected(std::move(zero.error()));
      tell(*channel, "", false, *zero);
      readings.zero = *zero;
    }
    co_return Result<void>{};
  }

 private:
  std::size_t column(const Channel& channel) const { return static_cast<std::size_t>(channel.input - inputs_.first); }

  bool maybeShunted(const Channel& channel) const {
    const auto& closed = run_.live.relays().maybeClosed();
    return std::any_of(channel.shunts.begin(), channel.shunts.end(),
                       [&](const description::Shunt& shunt) { return closed.contains(shunt.relay); });
  }

  /// Open, closed, open, ... A relay's refusal ends this shunt, not the calibration.
  Task<Result<ShuntReadings>> measure(const Channel& channel, const description::Shunt& shunt) {
    ShuntReadings readings;
    auto taken = co_await window(channel, shunt, false, readings);
    if (!taken) co_return std::unexpected(std::move(taken.error()));
    for (int repeat = 0; repeat < settings_.repeats; ++repeat) {
      for (const bool closed : {true, false}) {
        auto switched = co_await operate(shunt.relay, closed);
        if (!switched) {
          if (switched.error().code != ErrorCode::device_error) co_return std::unexpected(std::move(switched.error()));
          readings.relayError = std::move(switched.error());
          // Leave it as open as it will go; what may still be closed stays in the guard's book.
          auto opened = co_await operate(shunt.relay, false);
          if (!opened && opened.error().code != ErrorCode::device_error) {
            co_return std::unexpected(std::move(opened.error()));
          }
          co_return readings;
        }
        auto next = co_await window(channel, shunt, closed, readings);
        if (!next) co_return std::unexpected(std::move(next.error()));
      }
    }
    co_return readings;
  }

  Task<Result<void>> operate(description::RelayRef relay, bool close) {
    if (close) co_return co_await run_.live.relays().close(run_.permit, relay);
    co_return co_await run_.live.relays().open(relay);
  }

  /// Waits for a steady reading, then takes one.
  Task<Result<void>> window(const Channel& channel, const description::Shunt& shunt, bool closed,
                            ShuntReadings& readings) {
    const Instant switched = clock_.now();
    const auto& relays = *run_.live.described().device(shunt.relay.device)->profile->relays;
    // 14 time constants leave less than a millionth of the step.
    const Instant earliest =
        switched + std::max(relays.operateTime, relays.releaseTime) + 14 * inputs_.filterTimeConstant;
    const int few = std::max(4, settings_.windowSamples / 4);
    const double floor = inputs_.resolution.in(volt_per_volt) / std::sqrt(12.0);
    const Instant giveUp = switched + settings_.settleLimit;
    Instant from = earliest;
    std::optional<Window> last;
    int steady = 0;
    while (steady < 2) {
      auto next = co_await reader_.take(column(channel), from, few);
      if (!next) co_return std::unexpected(std::move(next.error()));
      from = next->end;
      if (next->samples < 2) break;  // saturated or silent: judged from the window itself
      if (last) {
        const double noise = std::max({floor, next->deviation.in(volt_per_volt), last->deviation.in(volt_per_volt)});
        const double moved = std::abs((next->mean - last->mean).in(volt_per_volt));
        steady = moved <= 3 * noise * std::sqrt(2.0 / few) ? steady + 1 : 0;
      }
      last = *next;
      if (steady < 2 && clock_.now() >= giveUp) {
        readings.steady = false;
        break;
      }
    }
    readings.settling = std::max(readings.settling, clock_.now() - switched);
    auto taken = co_await reader_.take(column(channel), from, settings_.windowSamples);
    if (!taken) co_return std::unexpected(std::move(taken.error()));
    (closed ? readings.closed : readings.opened).push_back(*taken);
    tell(channel, shunt.name, closed, *taken);
    co_return Result<void>{};
  }

  void tell(const Channel& channel, const std::string& shunt, bool closed, const Window& window) {
    ++run_.windowsDone;
    if (!run_.options.progress) return;
    Progress progress;
    progress.windowsDone = run_.windowsDone;
    progress.windowsPlanned = run_.windowsPlanned;
    progress.channel = channel.name;
    progress.shunt = shunt;
    progress.closed = closed;
    progress.reading = window.mean;
    run_.options.progress(progress);
  }

  Run& run_;
  Share& share_;
  Clock& clock_;
  const description::CalibrationSettings& settings_;
  const description::Inputs& inputs_;
  WindowReader reader_;
};

struct Stopped {};

/// Runs one share; an error stops the others too.
Task<void> runShare(Run& run, Share& share) {
  Sequence sequence(run, share);
  auto done = co_await sequence.all();
  if (done) co_return;
  share.error = std::move(done.error());
  if (!run.firstError) run.firstError = &*share.error;
  throw Stopped{};
}

Task<Result<void>> runShares(Run& run, std::vector<std::unique_ptr<Share>>& shares) {
  std::vector<std::function<Task<void>()>> bodies;
  for (auto& share : shares) {
    bodies.push_back([&run, one = share.get()]() -> Task<void> { return runShare(run, *one); });
  }
  try {
    co_await whenAll(std::move(bodies));
  } catch (const Stopped&) {
    // Told apart from cancellation: the share's own error is what happened.
  }
  if (run.firstError) co_return std::unexpected(*run.firstError);
  co_return Result<void>{};
}

Task<Result<void>> runAll(Run& run, std::vector<std::unique_ptr<Share>>& shares) {
  if (auto ready = co_await run.live.prepare(run.permit); !ready) co_return ready;
  co_return co_await runShares(run, shares);
}

Result<std::vector<const Channel*>> chosen(const Rack& rack, const std::vector<std::string>& only) {
  std::vector<const Channel*> channels;
  for (const auto& wanted : only) {
    if (!rack.channel(wanted)) {
      return fail(ErrorCode::not_found, "the rack has no channel " + wanted, rack.file);
    }
  }
  for (const auto& channel : rack.channels) {
    if (only.empty() || std::find(only.begin(), only.end(), channel.name) != only.end()) channels.push_back(&channel);
  }
  return channels;
}

/// A remark, no failure: what was measured stays right, but its chain to the standards has lapsed.
void noteCertificates(const Rack& rack, const Channel& channel, Instant when, ChannelResult& result) {
  std::set<std::string> told;
  for (const auto& shunt : channel.shunts) {
    const auto& resistor = rack.resistorOf(shunt);
    if (!rack::overdue(resistor, rack::dayOf(when)) || !told.insert(resistor.name).second) continue;
    result.findings.push_back({"certificate-overdue",
                               "the certificate of shunt resistor " + resistor.name + " is overdue",
                               "certificate " + resistor.certificate + " good until " + rack::isoText(*resistor.due) +
                                   ", used on " + rack::isoText(rack::dayOf(when))});
  }
}

std::string recordId(Instant started, Random& random) {
  std::string stamp = rfc3339(started);  // 2026-05-04T09:30:00.000Z
  std::string id = stamp.substr(0, 4) + stamp.substr(5, 2) + stamp.substr(8, 2) + "-" + stamp.substr(11, 2) +
                   stamp.substr(14, 2) + stamp.substr(17, 2);
  char tail[8];
  std::snprintf(tail, sizeof tail, "-%04x", static_cast<unsigned>(random.below(0x10000)));
  return id + tail;
}

}  // namespace

Task<Result<Record>> calibrate(rack::LiveRack& live, rack::LoadPathPermit permit, Random& random, Options options) {
  const Rack& rack = live.described();
  auto channels = chosen(rack, options.onlyChannels);
  if (!channels) co_return std::unexpected(std::move(channels.error()));

  Record record;
  record.started = live.clock().now();
  record.id = recordId(record.started, random);
  record.software = "shuntwright " SHUNTWRIGHT_VERSION;
  record.rackName = rack.name;
  record.rackFile = rack.file;
  for (const auto& described : rack.devices) {
    const device::Identity& found = live.identity(described.name);
    record.devices.push_back({described.name, found.model, found.serialNumber});
  }

  Run run{live, permit, options};
  std::vector<std::unique_ptr<Share>> shares;
  for (const auto& described : rack.devices) {
    auto share = std::make_unique<Share>();
    for (const Channel* channel : *channels) {
      if (channel->device != described.name) continue;
      share->channels.push_back(channel);
      run.windowsPlanned += 1 + static_cast<int>(channel->shunts.size()) * (2 * rack.calibration.repeats + 1);
    }
    if (share->channels.empty()) continue;
    share->amplifier = &live.device(described.name);
    shares.push_back(std::move(share));
  }

  Result<void> done;
  std::exception_ptr thrown;
  try {
    done = co_await rack::withRelays(live.relays(), [&run, &shares]() -> Task<Result<void>> { return runAll(run, shares); });
  } catch (...) {
    thrown = std::current_exception();
  }
  // Relays first, then the streams.
  co_await asio::this_coro::reset_cancellation_state(asio::disable_cancellation());
  for (auto& share : shares) {
    auto stopped = co_await share->amplifier->stop();
    (void)stopped;  // the amplifier is left sampling; nothing depends on it
  }
  co_await asio::this_coro::reset_cancellation_state(asio::enable_terminal_cancellation());
  if (thrown) std::rethrow_exception(thrown);
  for (const auto& relay : live.relays().maybeClosed()) record.relaysMaybeClosed.push_back(rack::text(relay));
  const bool complete = !run.firstError && run.windowsDone > 0;
  if (!done && (!complete || record.relaysMaybeClosed.empty())) co_return std::unexpected(std::move(done.error()));

  for (const Channel* channel : *channels) {
    for (auto& share : shares) {
      if (share->amplifier->described().name != channel->device) continue;
      record.channels.push_back(analyse(rack, *channel, share->readings[channel->name]));
      noteCertificates(rack, *channel, record.started, record.channels.back());
    }
  }
  record.windows = run.windowsDone;
  record.duration = live.clock().now() - record.started;
  co_return record;
}

}  // namespace shuntwright::calibration
