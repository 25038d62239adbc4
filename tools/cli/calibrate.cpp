#include <CLI/CLI.hpp>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <ostream>

#include "driver/calibration/calibrate.h"
#include "driver/calibration/record_json.h"
#include "tools/cli/bench_session.h"
#include "tools/cli/command.h"
#include "tools/cli/record_table.h"

namespace shuntwright::cli {

namespace {

class Calibrate final : public Command {
 public:
  std::string name() const override { return "calibrate"; }
  std::string summary() const override {
    return "The shunt sequence: before, shunt, after for every channel; finds each correction and its uncertainty";
  }
  std::string example() const override { return "shuntwright calibrate profiles/racks/gantry_beam.toml --isolated"; }
  void configure(CLI::App& app) override {
    bench_.addTo(app);
    app.add_flag("--isolated", isolated_,
                 "Confirms that the load path is isolated: no shunted channel closes a load-control loop");
    app.add_option("--channels", channels_, "Only these channels, separated by commas")->delimiter(',');
    app.add_option("--out", out_, "Write the record (JSON) to this file as well");
    app.add_option("--budget", budget_, "Print the uncertainty budget of this channel");
  }

  int run(const Console& console) override {
    auto rack = loadRackFor(console, bench_.rackFile);
    if (!rack) return kBadUse;
    auto permit = askForPermit(console, *rack, isolated_);
    if (!permit) return console.fail(permit.error());
    calibration::Options options;
    options.onlyChannels = channels_;
    options.progress = [&console](const calibration::Progress& p) {
      console.progress(static_cast<double>(p.windowsDone) / std::max(1, p.windowsPlanned),
                       p.channel + (p.shunt.empty() ? " zero" : " " + p.shunt + (p.closed ? " closed" : " open")));
    };
    calibration::Record record;
    const int code = runOnBench(console, *rack, bench_, false,
                                [&record, &permit, &options](SessionContext context) -> Task<Result<int>> {
                                  return measure(context, *permit, options, &record);
                                });
    if (code != kPassed && record.id.empty()) return code;
    return finish(console, *rack, record);
  }

 private:
  static Task<Result<int>> measure(SessionContext context, rack::LoadPathPermit permit, calibration::Options options,
                                   calibration::Record* record) {
    Random random(context.seed);
    auto done = co_await calibration::calibrate(context.live, permit, random, options);
    if (!done) co_return std::unexpected(std::move(done.error()));
    *record = std::move(*done);
    co_return kPassed;
  }

  int finish(const Console& console, const description::Rack& rack, const calibration::Record& record) const {
    const std::string text = calibration::recordJson(record);
    // A part of the channels, or a replay, does not become the calibration in force.
    if (channels_.empty() && !isReplay(bench_, rack)) {
      if (auto kept = writeFile(calibrationPath(rack), text + "\n"); !kept) return console.fail(kept.error());
    }
    if (!out_.empty()) {
      if (auto kept = writeFile(out_, text + "\n"); !kept) return console.fail(kept.error());
    }
    if (console.json) {
      console.out << text << '\n';
    } else {
      printRecord(console, record);
      if (!budget_.empty()) {
        const auto* channel = record.channel(budget_);
        if (!channel) return console.fail(Error(ErrorCode::not_found, "the record has no channel " + budget_));
        printBudget(console, *channel);
      }
    }
    if (!record.relaysMaybeClosed.empty()) return kDeviceFailure;
    return record.passed() ? kPassed : kFailedLimits;
  }

  BenchOptions bench_;
  bool isolated_ = false;
  std::vector<std::string> channels_;
  std::string out_, budget_;
};

}  // namespace

std::unique_ptr<Command> makeCalibrate() { return std::make_unique<Calibrate>(); }

}  // namespace shuntwright::cli
