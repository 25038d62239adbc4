#include <CLI/CLI.hpp>
#include <algorithm>
#include <boost/json/array.hpp>
#include <boost/json/object.hpp>
#include <boost/json/parse.hpp>
#include <boost/json/serialize.hpp>
#include <chrono>
#include <cmath>
#include <ostream>

#include "driver/calibration/record_json.h"
#include "tools/cli/bench_session.h"
#include "tools/cli/command.h"
#include "tools/cli/demo_run.h"
#include "tools/cli/record_table.h"

namespace shuntwright::cli {

namespace {

namespace json = boost::json;

double medianOf(std::vector<double> values) {
  if (values.empty()) return 0;
  std::sort(values.begin(), values.end());
  const std::size_t n = values.size();
  return n % 2 ? values[n / 2] : (values[n / 2 - 1] + values[n / 2]) / 2;
}

class Demo final : public Command {
 public:
  std::string name() const override { return "demo"; }
  std::string summary() const override {
    return "The whole job on the simulator: calibrates the gantry beam's rack, records its proof load, compares with the truth";
  }
  std::string example() const override { return "shuntwright demo --seed 7 --out demo.h5"; }
  void configure(CLI::App& app) override {
    app.add_option("--seed", seed_, "Seed of the simulated truth");
    app.add_option("--out", out_, "Keep the recording (HDF5) here");
  }

  int run(const Console& console) override {
    auto rack = loadRackFor(console, profilesFolder() + "/racks/gantry_beam.toml");
    if (!rack) return kBadUse;
    const auto scenario = demoScenario(*rack);
    if (!scenario) return console.fail(scenario.error());
    DemoOptions options;
    options.seed = seed_;
    options.recordingPath = out_;
    options.progress = [&console](const calibration::Progress& p) {
      console.progress(static_cast<double>(p.windowsDone) / p.windowsPlanned, "calibrating " + p.channel);
    };
    const auto begun = std::chrono::steady_clock::now();
    auto run = runDemo(*rack, *scenario, options);
    console.endProgress();
    if (!run) return console.fail(run.error());
    const double took_s = std::chrono::duration<double>(std::chrono::steady_clock::now() - begun).count();
    if (console.json) {
      printJson(console, *run);
    } else {
      print(console, *rack, *run, took_s);
    }
    if (!run->relaysOpen) return kDeviceFailure;
    return run->calibration.passed() ? kPassed : kFailedLimits;
  }

 private:
  void printJson(const Console& console, const DemoRun& run) const {
    json::object o;
    o["calibration"] = json::parse(calibration::recordJson(run.calibration));
    json::array channels;
    for (const auto& c : run.channels) {
      json::object one;
      one["name"] = c.name;
      one["unit"] = c.unit;
      one["true_value"] = c.trueValue;
      one["corrected_value"] = c.corrected;
      one["uncorrected_error_percent"] = c.uncorrectedError_percent;
      one["corrected_error_percent"] = c.correctedError_percent;
      one["expanded_uncertainty_percent"] = c.expandedUncertainty_percent;
      one["inside_uncertainty"] = c.insideUncertainty();
      one["total_error_percent"] = c.totalError_percent;
      one["total_expanded_uncertainty_percent"] = c.totalExpandedUncertainty_percent;
      one["gauge_resistance_measured"] = c.gaugeResistanceMeasured;
      channels.push_back(std::move(one));
    }
    o["channels"] = std::move(channels);
    o["seed"] = seed_;
    o["rows"] = out_.empty() ? json::value(nullptr) : json::value(run.rows);
    o["lost"] = run.lost;
    o["simulated_s"] = run.simulated_s;
    console.out << json::serialize(o) << '\n';
  }

  void print(const Console& console, const description::Rack& rack, const DemoRun& run, double took_s) const {
    console.out << "Everything here is invented: rack, beam, truth. " << rack.title << "\n\n";
    printRecord(console, run.calibration);
    console.out << "\n"
                << console.bold("Proof load against the simulated truth") << ", at the largest load, in percent of each channel's"
                << " true value\n";
    using A = Table::Align;
    Table table({{"channel", A::left}, {"true"}, {"corrected"}, {"unit", A::left}, {"uncorrected error %"},
                 {"corrected error %"}, {"U (95.45 %) %"}, {"inside", A::left}, {"with K: error %"}, {"with K: U %"}});
    std::vector<double> before, after;
    int inside = 0;
    for (const auto& c : run.channels) {
      table.row({c.name, fixed(c.trueValue, 2), fixed(c.corrected, 2), c.unit, fixed(c.uncorrectedError_percent, 2),
                 fixed(c.correctedError_percent, 3), fixed(c.expandedUncertainty_percent, 3),
                 c.insideUncertainty() ? "yes" : console.bad("no"), fixed(c.totalError_percent, 2),
                 fixed(c.totalExpandedUncertainty_percent, 2)});
      before.push_back(std::abs(c.uncorrectedError_percent));
      after.push_back(std::abs(c.correctedError_percent));
      inside += c.insideUncertainty();
    }
    table.print(console);
    console.out << "\nmedian error of the chain: uncorrected " << fixed(medianOf(before), 2) << " %, corrected "
                << fixed(medianOf(after), 3) << " % (" << fixed(medianOf(before) / std::max(1e-9, medianOf(after)), 0)
                << " times less); " << inside << " of " << run.channels.size() << " channels inside their stated uncertainty\n"
                << "\"with K\" adds the gauge factor's own tolerance, which no shunt can see. Seed " << seed_ << "; "
                << fixed(run.simulated_s, 0) << " s of test in " << fixed(took_s, 1) << " s";
    if (!out_.empty()) console.out << "; " << run.rows << " rows in " << out_;
    console.out << "; every relay is " << (run.relaysOpen ? "open" : console.bad("NOT open")) << ".\n";
  }

  std::uint64_t seed_ = 1;
  std::string out_;
};

}  // namespace

std::unique_ptr<Command> makeDemo() { return std::make_unique<Demo>(); }

}  // namespace shuntwright::cli
