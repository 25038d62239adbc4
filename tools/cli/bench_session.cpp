#include "tools/cli/bench_session.h"

#include <fcntl.h>
#include <unistd.h>

#include <CLI/CLI.hpp>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/signal_set.hpp>
#include <boost/system/system_error.hpp>
#include <cerrno>
#include <csignal>
#include <cstdlib>
#include <cstring>
#include <filesystem>
#include <fstream>
#include <iostream>
#include <random>
#include <sstream>

#include "driver/description/load.h"
#include "driver/rack/open_all_script.h"
#include "driver/rack/prediction.h"
#include "driver/transport/port_opener.h"
#include "driver/transport/replay_stream.h"
#include "driver/transport/trace.h"
#include "driver/transport/tracing_stream.h"

namespace shuntwright::cli {

namespace asio = boost::asio;

void BenchOptions::addTo(CLI::App& app) {
  app.add_option("RACK", rackFile, "The rack (TOML)")->required();
  app.add_option("--trace", traceFile, "Write what goes over the wires to this file");
  app.add_option("--replay", replayFile, "Play a traced file in place of the devices, in virtual time");
  app.add_option("--seed", seed, "Seed of the record's id (by chance when left out)");
}

std::string stateFolder() {
  if (const char* set = std::getenv("XDG_STATE_HOME"); set && *set) return std::string(set) + "/shuntwright";
  const char* home = std::getenv("HOME");
  return std::string(home && *home ? home : "/tmp") + "/.local/state/shuntwright";
}

std::string lockFolder() {
  return std::filesystem::is_directory("/run/lock") ? "/run/lock/shuntwright" : "/tmp/shuntwright-lock";
}

std::string journalPath(const description::Rack& rack) { return rack::journalPath(stateFolder(), rack); }
std::string openAllPath(const description::Rack& rack) { return rack::stateName(stateFolder(), rack) + ".open-all"; }
std::string calibrationPath(const description::Rack& rack) { return rack::stateName(stateFolder(), rack) + ".calibration.json"; }

bool isReplay(const BenchOptions& options, const description::Rack& rack) {
  const auto traced = [](const auto& device) { return device.port.kind == description::Port::Kind::replay; };
  return !options.replayFile.empty() || std::all_of(rack.devices.begin(), rack.devices.end(), traced);
}

std::optional<description::Rack> loadRackFor(const Console& console, const std::string& file) {
  description::Diagnostics diagnostics;
  auto rack = description::loadRack(file, description::diskReader(), diagnostics);
  if (rack) (void)rack::predict(*rack, diagnostics);
  if (!diagnostics.problems().empty()) console.err << diagnostics.render(console.colour && console.errIsTerminal);
  if (!diagnostics.ok()) return std::nullopt;
  return rack;
}

Result<void> writeFile(const std::string& path, const std::string& text) {
  std::error_code ec;
  const auto folder = std::filesystem::path(path).parent_path();
  if (!folder.empty()) std::filesystem::create_directories(folder, ec);
  const std::string temporary = path + ".new";
  const int file = ::open(temporary.c_str(), O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0644);
  const bool written = file >= 0 && ::write(file, text.data(), text.size()) == static_cast<ssize_t>(text.size()) &&
                       ::fsync(file) == 0;
  const int problem = errno;
  if (file >= 0) ::close(file);
  if (!written || ::rename(temporary.c_str(), path.c_str()) != 0) {
    const int number = written ? errno : problem;
    ::unlink(temporary.c_str());
    return shuntwright::fail(ErrorCode::io, std::string("cannot write the file: ") + std::strerror(number), path,
                             "check the folder and the free space");
  }
  return {};
}

Result<std::string> readFile(const std::string& path) {
  std::ifstream in(path, std::ios::binary);
  if (!in) return shuntwright::fail(ErrorCode::not_found, "the file cannot be read", path, "check the path");
  std::ostringstream text;
  text << in.rdbuf();
  return text.str();
}

Result<rack::LoadPathPermit> askForPermit(const Console& console, const description::Rack& rack, bool isolated) {
  if (isolated || !console.interactive) return rack::confirmLoadPath(rack, isolated, "--isolated");
  console.err << rack::loadPathQuestion(rack) << std::flush;
  std::string answer;
  std::getline(std::cin, answer);
  return rack::confirmLoadPath(rack, answer == "yes", "terminal");
}

namespace {

struct Outcome {
  Result<int> result = shuntwright::fail(ErrorCode::cancelled, "stopped before it was done");
  bool ended = false;
  std::exception_ptr thrown;
};

struct Whole {
  const description::Rack& rack;
  transport::Opener opener;
  Clock& clock;
  rack::RelayJournal& journal;
  rack::LiveRackOptions options;
  std::uint64_t seed;
  const bool& stopAsked;
  std::function<Task<Result<int>>(SessionContext)> body;
  Outcome& outcome;

  static Task<void> run(Whole& w) {
    auto live = co_await rack::LiveRack::open(w.rack, w.opener, w.clock, w.journal, w.options);
    if (!live) {
      w.outcome.result = std::unexpected(std::move(live.error()));
      co_return;
    }
    const SessionContext context{**live, w.seed, w.stopAsked};
    w.outcome.result = co_await w.body(context);
    (*live)->close();
  }
};

}  // namespace

int runOnBench(const Console& console, const description::Rack& rack, const BenchOptions& options, bool stopGently,
               std::function<Task<Result<int>>(SessionContext)> body) {
  asio::io_context context;
  RealClock realClock(context);
  std::unique_ptr<VirtualClock> virtualClock;
  transport::Opener opener = transport::portOpener(realClock);
  Clock* clock = &realClock;
  std::unique_ptr<rack::RelayJournal> journal;
  rack::LiveRackOptions liveOptions;
  const auto traced = transport::replayStart(rack);
  if (!traced) return console.fail(traced.error());
  if (options.replayFile.empty() && *traced) {
    virtualClock = std::make_unique<VirtualClock>(**traced);
    clock = virtualClock.get();
    opener = transport::portOpener(*clock);
    journal = std::make_unique<rack::MemoryJournal>();
  } else if (!options.replayFile.empty()) {
    auto trace = transport::loadTrace(options.replayFile);
    if (!trace) return console.fail(trace.error());
    virtualClock = std::make_unique<VirtualClock>(trace->start);
    clock = virtualClock.get();
    opener = transport::replayOpener(std::move(*trace), options.replayFile, *clock);
    journal = std::make_unique<rack::MemoryJournal>();
  } else {
    liveOptions.lockFolder = lockFolder();
    auto file = rack::FileJournal::open(journalPath(rack));
    if (!file) return console.fail(file.error());
    journal = std::move(*file);
    auto script = rack::compileOpenAll(rack);
    if (!script) return console.fail(script.error());
    if (auto kept = writeFile(openAllPath(rack), script->text()); !kept) return console.fail(kept.error());
  }
  if (!options.traceFile.empty()) {
    auto tracing = transport::tracingOpener(opener, options.traceFile, *clock);
    if (!tracing) return console.fail(tracing.error());
    opener = std::move(*tracing);
  }
  // A replay gives the same bytes every time, the record's id included.
  const std::uint64_t byChance = virtualClock ? static_cast<std::uint64_t>(clock->now().time_since_epoch().count())
                                              : std::random_device{}();
  const std::uint64_t seed = options.seed != 0 ? options.seed : byChance;

  Outcome outcome;
  bool stopAsked = false;
  asio::cancellation_signal cancel;
  Whole whole{rack, opener, *clock, *journal, liveOptions, seed, stopAsked, std::move(body), outcome};
  Whole* pointer = &whole;
  asio::signal_set signals(context, SIGINT, SIGTERM);
  std::function<void()> watch = [&] {
    signals.async_wait([&](boost::system::error_code ec, int) {
      if (ec) return;
      if (stopGently && !stopAsked) {
        stopAsked = true;
      } else {
        cancel.emit(asio::cancellation_type::terminal);
      }
      watch();
    });
  };
  watch();
  asio::co_spawn(
      context, [pointer]() -> Task<void> { return Whole::run(*pointer); },
      asio::bind_cancellation_slot(cancel.slot(), [&](std::exception_ptr e) {
        outcome.thrown = e;
        outcome.ended = true;
        signals.cancel();
      }));
  if (virtualClock) {
    runVirtual(context, *virtualClock, [&] { return outcome.ended; });
  } else {
    while (!outcome.ended && context.run_one() > 0) {
    }
  }
  console.endProgress();
  if (outcome.thrown) {
    try {
      std::rethrow_exception(outcome.thrown);
    } catch (const boost::system::system_error& e) {
      if (e.code() == asio::error::operation_aborted) {
        const auto left = journal->unresolved();
        return console.fail(Error(ErrorCode::cancelled,
                                  left.empty() ? "stopped on request; every relay is open"
                                               : "stopped on request; some relays may still be closed",
                                  {}, left.empty() ? "" : "run `shuntwright release` on this rack"));
      }
      return console.fail(Error(ErrorCode::io, e.what()));
    } catch (const std::exception& e) {
      return console.fail(Error(ErrorCode::io, e.what()));
    }
  }
  if (!outcome.result) return console.fail(outcome.result.error());
  return *outcome.result;
}

}  // namespace shuntwright::cli
