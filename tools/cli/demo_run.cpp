#include "tools/cli/demo_run.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/io_context.hpp>
#include <cmath>
#include <cstdlib>
#include <filesystem>
#include <limits>
#include <map>

#include "driver/calibration/zero.h"
#include "driver/description/load.h"
#include "driver/description/wiring.h"
#include "driver/rack/live_rack.h"
#include "driver/recording/load_steps.h"
#include "sim/amplifier/bench.h"
#include "sim/fault/scenario_file.h"
#include "tools/cli/recording_session.h"
#include "tools/simhost/serve.h"

namespace shuntwright::cli {

namespace asio = boost::asio;
using namespace units;

bool DemoChannel::insideUncertainty() const {
  return std::abs(correctedError_percent) <= expandedUncertainty_percent;
}

namespace {

constexpr Nanoseconds kZeroTime = std::chrono::seconds(2);

struct Mean {
  double sum = 0, square = 0;
  double n = 0;
  void add(double x) {
    sum += x;
    square += x * x;
    n += 1;
  }
  double mean() const { return n > 0 ? sum / n : 0; }
  double deviation() const { return n > 1 ? std::sqrt(std::max(0.0, square / n - mean() * mean())) : 0; }
};

/// The load programme as marks: each hold begins a second after its ramp has ended.
struct Hold {
  double begin_s, end_s, level;
};

std::vector<Hold> holdsOf(const sim::Scenario& scenario) {
  std::vector<Hold> holds;
  double at_s = 0;
  for (const double level : scenario.levels) {
    at_s += seconds(scenario.ramp);
    holds.push_back({at_s + 1, at_s + seconds(scenario.hold), level});
    at_s += seconds(scenario.hold);
  }
  return holds;
}

struct Work {
  Work(const description::Rack& r, const sim::Scenario& s, const DemoOptions& o) : rack(r), scenario(s), options(o) {}

  const description::Rack& rack;
  const sim::Scenario& scenario;
  const DemoOptions& options;
  VirtualClock clock;
  rack::MemoryJournal journal;
  std::unique_ptr<sim::Bench> bench;
  DemoRun run;
  std::map<std::string, Mean> ratioAtPeak, correctedAtPeak;
  Instant loadStart;
  Result<void> outcome;

  Task<Result<void>> all() {
    auto live = co_await rack::LiveRack::open(rack, simhost::memoryOpener(*bench, clock), clock, journal);
    if (!live) co_return std::unexpected(std::move(live.error()));
    auto permit = rack::confirmLoadPath(rack, true, "simulator");
    Random random(options.seed);
    calibration::Options wanted;
    wanted.progress = options.progress;
    auto record = co_await calibration::calibrate(**live, *permit, random, wanted);
    if (!record) co_return std::unexpected(std::move(record.error()));
    run.calibration = std::move(*record);
    // People clear the hall and the weights are brought; meanwhile the leads go on warming.
    co_await waitFor(clock, std::chrono::minutes(30));
    // The last thing before the load: the zero again.
    auto zeros = co_await calibration::takeZeros(**live, *permit, kZeroTime);
    if (!zeros) co_return std::unexpected(std::move(zeros.error()));
    const Nanoseconds programme = fromSeconds(holdsOf(scenario).back().end_s) + std::chrono::seconds(2);
    run.zeroFindings = calibration::rezero(run.calibration, rack, *zeros, clock.now(), programme);
    auto recorded = co_await loadTest(**live, *permit);
    if (!recorded) co_return recorded;
    run.relaysOpen = bench->closedRelays().empty();
    (*live)->close();
    co_return Result<void>{};
  }

  Task<Result<void>> loadTest(rack::LiveRack& live, rack::LoadPathPermit permit) {
    auto session = RecordingSession::begin(rack, run.calibration, options.recordingPath, clock);
    if (!session) co_return std::unexpected(std::move(session.error()));
    loadStart = clock.now() + std::chrono::seconds(2);
    bench->startLoad(loadStart);
    const auto holds = holdsOf(scenario);
    const auto peak = *std::max_element(holds.begin(), holds.end(),
                                        [](const Hold& a, const Hold& b) { return a.level < b.level; });
    const auto from = loadStart + fromSeconds(peak.begin_s), to = loadStart + fromSeconds(peak.end_s);
    RecordingSession& recording = **session;
    recording.onSample = [&](std::size_t k, Instant when, float ratio, float corrected, std::uint8_t flags) {
      if (flags != 0 || when < from || when > to || !std::isfinite(corrected)) return;
      ratioAtPeak[recording.live()[k].channel].add(ratio);
      correctedAtPeak[recording.live()[k].channel].add(corrected);
    };
    std::size_t next = 0;
    bool inside = false;
    const Instant end = loadStart + fromSeconds(holds.back().end_s);
    const std::function<bool()> stop = [&] {
      const double at_s = seconds(clock.now() - loadStart);
      if (next < holds.size() && !inside && at_s >= holds[next].begin_s) {
        inside = true;
        (void)recording.mark(recording::kStepBegin, std::to_string(std::lround(100 * holds[next].level)) + " %");
      } else if (inside && at_s >= holds[next].end_s) {
        inside = false;
        ++next;
        (void)recording.mark(recording::kStepEnd, "");
      }
      return clock.now() >= end;
    };
    auto done = co_await recording.run(live, permit, stop);
    if (!done) co_return done;
    run.rows = recording.rows();
    run.lost = recording.lost();
    co_return recording.finish();
  }

  /// Textbook value: the ratio's change from zero over the small-strain slope without leads.
  double uncorrected(const description::Channel& channel, const calibration::ChannelResult& result) const {
    const double change = ratioAtPeak.at(channel.name).mean() - result.zero.in(volt_per_volt);
    if (channel.transducer) return change / channel.transducer->sensitivity.in(volt_per_volt);
    const auto weights = description::armWeights(channel.circuit, channel.poisson);
    const double bridgeFactor = weights[0] - weights[1] + weights[2] - weights[3];
    return 4 * change / (rack.gaugeOf(channel).factor.value() * bridgeFactor);
  }

  void compare() {
    const auto holds = holdsOf(scenario);
    const auto peak = *std::max_element(holds.begin(), holds.end(),
                                        [](const Hold& a, const Hold& b) { return a.level < b.level; });
    const Instant middle = loadStart + fromSeconds((peak.begin_s + peak.end_s) / 2);
    for (const auto& result : run.calibration.channels) {
      if (result.shunts.empty()) continue;
      const auto& channel = *rack.channel(result.name);
      const auto truth = bench->truth(channel.name, middle);
      const double trueStrain = truth.strain.in(strain);
      const double nominalFactor = channel.transducer ? 1 : rack.gaugeOf(channel).factor.value();
      const double corrected = correctedAtPeak[channel.name].mean() / result.unitsPerStrain;
      const double chain = corrected * nominalFactor / truth.gaugeFactor.value();
      DemoChannel c;
      c.name = channel.name;
      c.unit = result.unit;
      c.trueValue = trueStrain * result.unitsPerStrain;
      c.corrected = corrected * result.unitsPerStrain;
      c.uncorrectedError_percent = 100 * (uncorrected(channel, result) * nominalFactor / truth.gaugeFactor.value() / trueStrain - 1);
      c.correctedError_percent = 100 * (chain / trueStrain - 1);
      c.totalError_percent = 100 * (corrected / trueStrain - 1);
      const double zero = 100 * result.zeroExpandedUncertainty.in(strain) / std::abs(trueStrain);
      const auto& held = correctedAtPeak[channel.name];
      const double mean = 100 * 2 * held.deviation() / std::sqrt(std::max(1.0, held.n)) / std::abs(c.trueValue);
      c.expandedUncertainty_percent = std::sqrt(std::pow(result.budget.expandedUncertainty_percent, 2) + zero * zero + mean * mean);
      c.totalExpandedUncertainty_percent =
          std::hypot(c.expandedUncertainty_percent, result.factorUncertainty_percent);
      c.gaugeResistanceMeasured = channel.measuredResistance.has_value();
      run.channels.push_back(std::move(c));
    }
  }
};

Task<void> work(Work* w) { w->outcome = co_await w->all(); }

}  // namespace

Result<sim::Scenario> demoScenario(const description::Rack& rack) {
  const std::string file = profilesFolder() + "/racks/gantry_beam.sim.toml";
  const auto text = description::diskReader()(file);
  if (!text) return std::unexpected(Error{ErrorCode::bad_file, "the demo's scenario cannot be read", file});
  description::Diagnostics diagnostics;
  auto scenario = sim::parseScenario(*text, file, rack, diagnostics);
  if (!diagnostics.ok()) return std::unexpected(Error{ErrorCode::bad_file, diagnostics.render(false), file});
  return scenario;
}

Result<DemoRun> runDemo(const description::Rack& rack, const sim::Scenario& scenario, const DemoOptions& options) {
  asio::io_context context;
  Work w(rack, scenario, options);
  w.bench = std::make_unique<sim::Bench>(rack, scenario, options.seed, w.clock.now());
  const Instant start = w.clock.now();
  bool ended = false;
  std::exception_ptr thrown;
  Work* pointer = &w;
  asio::co_spawn(
      context, [pointer]() -> Task<void> { return work(pointer); },
      [&](std::exception_ptr e) {
        ended = true;
        thrown = e;
      });
  runVirtual(context, w.clock, [&] { return ended; });
  if (thrown) std::rethrow_exception(thrown);
  if (!w.outcome) return std::unexpected(std::move(w.outcome.error()));
  w.run.simulated_s = seconds(w.clock.now() - start);
  w.compare();
  return std::move(w.run);
}

std::string profilesFolder() {
  namespace fs = std::filesystem;
  if (const char* set = std::getenv("SHUNTWRIGHT_PROFILES"); set && *set) return set;
  if (fs::is_directory("profiles/racks")) return "profiles";
  std::error_code ec;
  fs::path at = fs::read_symlink("/proc/self/exe", ec).parent_path();
  for (int up = 0; up < 5 && !at.empty(); ++up, at = at.parent_path()) {
    if (fs::is_directory(at / "profiles/racks")) return (at / "profiles").string();
  }
  return "profiles";
}

}  // namespace shuntwright::cli
