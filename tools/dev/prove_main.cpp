// Runs one of the project's campaigns, prints its table and exits 0 only if the promise holds.
#include <CLI/CLI.hpp>
#include <algorithm>
#include <boost/json/object.hpp>
#include <boost/json/serialize.hpp>
#include <cmath>
#include <iostream>
#include <map>

#include "driver/description/load.h"
#include "tools/cli/console.h"
#include "tools/cli/demo_run.h"

namespace shuntwright {
namespace {

double medianOf(std::vector<double> values) {
  std::sort(values.begin(), values.end());
  return values.empty() ? 0 : values[values.size() / 2];
}

/// The demo pooled over fixed seeds: channels inside their stated expanded uncertainty as often as it says, and
/// a median error of at most 0.1 % of the chain.
int demoCampaign(const description::Rack& rack, int first, int seeds, bool json) {
  const auto scenario = cli::demoScenario(rack);
  if (!scenario) {
    std::cerr << scenario.error().text() << '\n';
    return cli::kBadUse;
  }
  std::vector<double> before, after, scaled;
  std::map<std::string, std::pair<int, int>> byChannel;  // inside, all
  int inside = 0, total = 0, failed = 0, withFactor = 0;
  for (int seed = first; seed < first + seeds; ++seed) {
    cli::DemoOptions options;
    options.seed = static_cast<std::uint64_t>(seed);
    auto run = cli::runDemo(rack, *scenario, options);
    if (!run) {
      std::cerr << "seed " << seed << ": " << run.error().text() << '\n';
      return cli::kDeviceFailure;
    }
    for (const auto& c : run->channels) {
      before.push_back(std::abs(c.uncorrectedError_percent));
      after.push_back(std::abs(c.correctedError_percent));
      scaled.push_back(std::abs(c.correctedError_percent) / c.expandedUncertainty_percent);
      inside += c.insideUncertainty();
      withFactor += std::abs(c.totalError_percent) <= c.totalExpandedUncertainty_percent;
      byChannel[c.name].first += c.insideUncertainty();
      ++byChannel[c.name].second;
      ++total;
    }
    failed += !run->calibration.passed() || !run->relaysOpen;
  }
  const double coverage = 100.0 * inside / total, corrected = medianOf(after), uncorrected = medianOf(before);
  const bool holds = coverage >= 94 && coverage <= 98 && corrected <= 0.1;
  if (json) {
    boost::json::object o;
    o["campaign"] = "demo";
    o["first_seed"] = first;
    o["seeds"] = seeds;
    o["channels"] = total;
    o["inside_percent"] = coverage;
    o["inside_with_gauge_factor_percent"] = 100.0 * withFactor / total;
    o["median_corrected_error_percent"] = corrected;
    o["median_uncorrected_error_percent"] = uncorrected;
    o["ratio"] = uncorrected / corrected;
    o["runs_with_a_failed_channel"] = failed;
    o["holds"] = holds;
    std::cout << boost::json::serialize(o) << '\n';
  } else {
    std::cout << "demo, " << seeds << " seeds from " << first << ", " << total << " channels\n"
              << "  inside the stated expanded uncertainty   " << cli::fixed(coverage, 2) << " %  (promise: 94 to 98)\n"
              << "  the same with the gauge factor           " << cli::fixed(100.0 * withFactor / total, 2) << " %\n"
              << "  median corrected error of the chain      " << cli::fixed(corrected, 4) << " %  (promise: at most 0.1)\n"
              << "  median uncorrected error                 " << cli::fixed(uncorrected, 3) << " %  ("
              << cli::fixed(uncorrected / corrected, 0) << " times)\n"
              << "  median error / U                         " << cli::fixed(medianOf(scaled), 3) << "\n"
              << "  runs with a failed channel               " << failed << "\n  inside by channel:";
    for (const auto& [name, counts] : byChannel) {
      std::cout << ' ' << name << ' ' << cli::fixed(100.0 * counts.first / counts.second, 0);
    }
    std::cout << '\n' << (holds ? "holds" : "DOES NOT HOLD") << '\n';
  }
  return holds ? 0 : 1;
}

}  // namespace
}  // namespace shuntwright

int main(int argc, char** argv) {
  using namespace shuntwright;
  CLI::App app{"Runs a campaign of the project and checks its promise."};
  std::string campaign;
  bool full = false, json = false;
  int first = 1;
  app.add_option("NAME", campaign, "demo")->required()->check(CLI::IsMember({"demo"}));
  app.add_flag("--full", full, "All seeds (200) instead of the short form (40)");
  app.add_option("--first", first, "The first seed; 1 is what the promise speaks of")->check(CLI::Range(1, 1'000'000));
  app.add_flag("--json", json, "One JSON document");
  CLI11_PARSE(app, argc, argv);
  description::Diagnostics diagnostics;
  auto rack = description::loadRack(cli::profilesFolder() + "/racks/gantry_beam.toml", description::diskReader(), diagnostics);
  if (!rack) {
    std::cerr << diagnostics.render(false);
    return cli::kBadUse;
  }
  return demoCampaign(*rack, first, full ? 200 : 40, json);
}
