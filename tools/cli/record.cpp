#include <fcntl.h>
#include <sys/ioctl.h>
#include <unistd.h>

#include <CLI/CLI.hpp>
#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/posix/stream_descriptor.hpp>
#include <boost/asio/read_until.hpp>
#include <boost/asio/streambuf.hpp>
#include <boost/asio/this_coro.hpp>
#include <boost/json/array.hpp>
#include <boost/json/object.hpp>
#include <boost/json/serialize.hpp>
#include <functional>
#include <istream>
#include <ostream>
#include <utility>

#include "driver/calibration/basis.h"
#include "driver/calibration/record_json.h"
#include "driver/calibration/zero.h"
#include "driver/recording/load_steps.h"
#include "tools/cli/bench_session.h"
#include "tools/cli/command.h"
#include "tools/cli/recording_session.h"

namespace shuntwright::cli {

namespace {

namespace asio = boost::asio;
namespace json = boost::json;

/// Lines typed while recording: "b LABEL" begins a hold, "e" ends it, "q" ends the recording, anything else is a
/// mark.
class Keyboard : public std::enable_shared_from_this<Keyboard> {
 public:
  Keyboard(asio::any_io_executor executor, RecordingSession& session, bool& quit, std::function<void()> typed)
      : input_(executor, ::dup(STDIN_FILENO)), session_(session), quit_(quit), typed_(std::move(typed)), flags_(::fcntl(STDIN_FILENO, F_GETFL)) {}

  void listen() {
    asio::async_read_until(input_, buffer_, '\n', [self = shared_from_this()](boost::system::error_code ec, std::size_t) {
      if (ec) return;
      std::istream in(&self->buffer_);
      std::string line;
      std::getline(in, line);
      self->take(line);
      self->listen();
    });
  }
  void stop() {
    boost::system::error_code ignored;
    input_.close(ignored);
    // The copy shares its flags with the terminal, which must not be left non-blocking for whoever uses it next.
    if (flags_ >= 0) ::fcntl(STDIN_FILENO, F_SETFL, flags_);
  }

 private:
  void take(const std::string& line) {
    typed_();
    if (line == "q") {
      quit_ = true;
    } else if (line == "e") {
      (void)session_.mark(recording::kStepEnd, "");
    } else if (line.starts_with("b ")) {
      (void)session_.mark(recording::kStepBegin, line.substr(2));
    } else {
      (void)session_.mark("mark", line);
    }
  }

  asio::posix::stream_descriptor input_;
  asio::streambuf buffer_;
  RecordingSession& session_;
  bool& quit_;
  std::function<void()> typed_;
  int flags_;
};

/// However the recording ends, a second Ctrl-C included: the terminal is as it was and the file ended properly.
struct Ending {
  RecordingSession& session;
  std::shared_ptr<Keyboard> keyboard;
  bool finished = false;

  Result<void> finish() {
    if (std::exchange(finished, true)) return {};
    if (keyboard) keyboard->stop();
    return session.finish();
  }
  ~Ending() { (void)finish(); }
};

std::size_t terminalWidth() {
  struct winsize size {};
  return ::ioctl(STDERR_FILENO, TIOCGWINSZ, &size) == 0 && size.ws_col > 0 ? size.ws_col : 80;
}

/// As many characters as fit, each one cell.
std::string clipped(const std::string& text, std::size_t width) {
  std::size_t used = 0, at = 0;
  for (; at < text.size(); ++at) {
    if ((static_cast<unsigned char>(text[at]) & 0xC0) != 0x80 && ++used > width) break;
  }
  return text.substr(0, at);
}

/// The live table: redrawn in place on a terminal, nothing in a pipe.
class LiveTable {
 public:
  explicit LiveTable(const Console& console) : console_(console) {}

  void draw(const RecordingSession& session, double elapsed_s) {
    if (!console_.errIsTerminal) return;
    // Back to the table's top, and everything below it away.
    std::string text = lines_ > 0 ? "\x1b[" + std::to_string(lines_) + "A\x1b[J" : "";
    lines_ = 0;
    // A line that wraps would take two, and the table would creep down the terminal.
    const std::size_t width = terminalWidth();
    const auto line = [&](const std::string& what) {
      text += clipped(what, width) + "\x1b[K\n";
      ++lines_;
    };
    line(fixed(elapsed_s, 1) + " s  " + std::to_string(session.rows()) + " rows  lost " + std::to_string(session.lost()) +
         "  [b LABEL begin hold, e end hold, q quit, text mark]" +
         (session.trouble().empty() ? "" : "  TROUBLE " + session.trouble()));
    const std::size_t perLine = std::max<std::size_t>(1, width / kCell);
    std::string row;
    std::size_t column = 0;
    for (const auto& v : session.live()) {
      char cell[64];
      const char* mark = (v.flags & device::kSaturated)   ? "SAT"
                         : (v.flags & device::kMissing)   ? "---"
                         : (v.flags & device::kSwitching) ? "RLY"
                         : v.calibrated                   ? ""
                                                          : "nom";
      std::snprintf(cell, sizeof cell, "%-6s %9.1f %-11s%-4s", v.channel.c_str(), static_cast<double>(v.value),
                    v.unit.c_str(), mark);
      row += cell;
      if (++column == perLine) {
        line(row);
        row.clear();
        column = 0;
      }
    }
    if (!row.empty()) line(row);
    console_.err << text << std::flush;
  }

  /// Somebody has typed a line: the terminal is one line further down.
  void typed() { ++lines_; }

 private:
  static constexpr std::size_t kCell = 32;  ///< of one channel
  const Console& console_;
  int lines_ = 0;
};

class Record final : public Command {
 public:
  std::string name() const override { return "record"; }
  std::string summary() const override { return "Records live corrected strain to a file, with a live table and marks from the keyboard"; }
  std::string example() const override { return "shuntwright record profiles/racks/gantry_beam.toml --out run.h5 --duration 60 --isolated"; }
  void configure(CLI::App& app) override {
    bench_.addTo(app);
    app.add_option("--out", out_, "The recording (HDF5); never overwritten")->required();
    app.add_option("--calibration", calibration_, "A calibration record (JSON); the rack's latest when left out");
    app.add_option("--duration", duration_s_, "Stop after this many seconds");
    app.add_flag("--zero", zero_, "Takes the zero anew first: the specimen carries no load now");
    app.add_option("--zero-seconds", zero_s_, "For how long the zero is read")->check(CLI::Range(0.1, 600.0));
    app.add_flag("--isolated", isolated_, "Confirms that the load path is isolated while relays are opened and rates set");
  }

  int run(const Console& console) override {
    auto rack = loadRackFor(console, bench_.rackFile);
    if (!rack) return kBadUse;
    const std::string file = calibration_.empty() ? calibrationPath(*rack) : calibration_;
    auto text = readFile(file);
    if (!text) {
      return console.fail(Error(ErrorCode::not_found, "no calibration of this rack is in force", file,
                                "run `shuntwright calibrate " + bench_.rackFile + "` first, or name one with --calibration"));
    }
    auto record = calibration::parseRecordJson(*text, file);
    if (!record) return console.fail(record.error());
    if (auto holds = calibration::stillHolds(*record, *rack); !holds) return console.fail(holds.error());
    if (!record->passed()) console.err << "note: calibration " << record->id << " did not pass for every channel\n";
    auto permit = askForPermit(console, *rack, isolated_);
    if (!permit) return console.fail(permit.error());
    Job job{console, *rack, *record, *permit, out_, duration_s_, zero_ ? zero_s_ : 0};
    return runOnBench(console, *rack, bench_, true, [&job](SessionContext context) -> Task<Result<int>> {
      return work(context, &job);
    });
  }

 private:
  struct Job {
    const Console& console;
    const description::Rack& rack;
    calibration::Record& record;
    rack::LoadPathPermit permit;
    std::string out;
    double duration_s;
    double zero_s;  ///< 0: the calibration's zeros stay
  };

  static Task<Result<int>> work(SessionContext context, Job* job) {
    if (auto same = calibration::sameDevices(job->record, context.live); !same) co_return std::unexpected(std::move(same.error()));
    if (auto ready = co_await context.live.prepare(job->permit); !ready) co_return std::unexpected(std::move(ready.error()));
    Clock& clock = context.live.clock();
    if (job->zero_s > 0) {
      auto zeroed = co_await takeZerosAnew(context, job);
      if (!zeroed) co_return std::unexpected(std::move(zeroed.error()));
    }
    auto session = RecordingSession::begin(job->rack, job->record, job->out, clock, job->duration_s);
    if (!session) co_return std::unexpected(std::move(session.error()));
    auto executor = co_await asio::this_coro::executor;
    bool quit = false;
    LiveTable table(job->console);
    Ending ending{**session, nullptr};
    std::shared_ptr<Keyboard>& keyboard = ending.keyboard;
    if (job->console.interactive) {
      keyboard = std::make_shared<Keyboard>(executor, **session, quit, [&table] { table.typed(); });
      keyboard->listen();
    }
    const Instant start = clock.now();
    Instant nextDraw = start;
    const std::function<bool()> stop = [&] {
      const Instant now = clock.now();
      if (now >= nextDraw) {
        table.draw(**session, seconds(now - start));
        nextDraw = now + std::chrono::milliseconds(250);
      }
      return quit || context.stopAsked || (job->duration_s > 0 && seconds(now - start) >= job->duration_s);
    };
    auto done = co_await (*session)->run(context.live, job->permit, stop);
    auto finished = ending.finish();
    table.draw(**session, seconds(clock.now() - start));
    if (!done) co_return std::unexpected(std::move(done.error()));
    if (!finished) co_return std::unexpected(std::move(finished.error()));
    report(job->console, **session, job->record.id);
    co_return kPassed;
  }

  static Task<Result<void>> takeZerosAnew(SessionContext context, Job* job) {
    auto zeros = co_await calibration::takeZeros(context.live, job->permit, fromSeconds(job->zero_s));
    if (!zeros) co_return std::unexpected(std::move(zeros.error()));
    // How long it has to hold; an hour when nobody says.
    const auto holds = fromSeconds(job->duration_s > 0 ? job->duration_s : 3600);
    for (const auto& finding :
         calibration::rezero(job->record, job->rack, *zeros, context.live.clock().now(), holds)) {
      job->console.err << "note: " << finding.message << (finding.evidence.empty() ? "" : " (" + finding.evidence + ")")
                       << '\n';
    }
    co_return Result<void>{};
  }

  static std::string joined(const std::vector<std::string>& files) {
    std::string all;
    for (const auto& file : files) all += (all.empty() ? "" : ", ") + file;
    return all;
  }

  static void report(const Console& console, const RecordingSession& session, const std::string& calibration) {
    if (console.json) {
      json::object o;
      const auto files = session.paths();
      o["file"] = files.front();
      json::array parts;
      for (const auto& file : files) parts.push_back(json::value(file));
      o["files"] = std::move(parts);
      o["calibration_id"] = calibration;
      o["rows"] = session.rows();
      o["lost"] = session.lost();
      json::array channels;
      for (const auto& v : session.live()) {
        json::object c;
        c["name"] = v.channel;
        c["unit"] = v.unit;
        c["calibrated"] = v.calibrated;
        c["samples"] = v.samples;
        c["least"] = v.least;
        c["most"] = v.most;
        channels.push_back(std::move(c));
      }
      o["channels"] = std::move(channels);
      console.out << json::serialize(o) << '\n';
    } else {
      console.out << "recorded " << session.rows() << " rows to " << joined(session.paths()) << ", lost " << session.lost() << '\n';
    }
  }

  BenchOptions bench_;
  std::string out_, calibration_;
  double duration_s_ = 0;
  double zero_s_ = 2;
  bool isolated_ = false, zero_ = false;
};

}  // namespace

std::unique_ptr<Command> makeRecord() { return std::make_unique<Record>(); }

}  // namespace shuntwright::cli
