// Runs one of the project's campaigns, prints its table and exits 0 only if the promise holds.
#include <fmt/format.h>
#include <algorithm>
#include <boost/json/array.hpp>
#include <boost/json/object.hpp>
#include <boost/json/serialize.hpp>
#include <CLI/CLI.hpp>
#include <cmath>
#include <iostream>
#include <map>

#include "driver/description/load.h"
#include "tools/cli/console.h"
#include "tools/cli/demo_run.h"
#include "tools/dev/coverage.h"
#include "tools/dev/dominance.h"

namespace shuntwright {
namespace {

double medianOf(std::vector<double> values) {
  std::sort(values.begin(), values.end());
  return values.empty() ? 0 : values[values.size() / 2];
}

/// The demo pooled over fixed seeds: channels inside their stated expanded uncertainty as often as it says,
/// and a median error of at most 0.1 % of the chain.
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
              << "  inside the stated expanded uncertainty   " << cli::fixed(coverage, 2)
              << " %  (promise: 94 to 98)\n"
              << "  the same with the gauge factor           " << cli::fixed(100.0 * withFactor / total, 2)
              << " %\n"
              << "  median corrected error of the chain      " << cli::fixed(corrected, 4)
              << " %  (promise: at most 0.1)\n"
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

/// One channel of every circuit, drawn again and again: how often the truth lies inside, by the GUM and by
/// JCGM 101.
int coverageCampaign(const description::Rack& rack, const std::string& only, int first, int racks, bool json) {
  boost::json::array rows;
  bool holds = true;
  if (!json)
    std::cout << "coverage, " << racks
              << " racks a circuit, shares inside in percent, width: median U over the interval that holds "
                 "95.45 %\n";
  for (const auto& channel : rack.channels) {
    if (!only.empty() && channel.name != only) continue;
    dev::CoverageOptions options;
    options.racks = racks;
    options.seed = static_cast<std::uint64_t>(first);
    const auto found = dev::coverageOf(rack, channel.name, options);
    if (!found) {
      std::cerr << found.error().text() << '\n';
      return cli::kBadUse;
    }
    for (const auto& c : *found) {
      const double slack = 300 * std::sqrt(0.9545 * 0.0455 / racks);  // three standard deviations of a share
      const bool good = c.gum_percent >= 94.45 - slack &&
                        !(std::abs(c.monteCarlo_percent - 95.45) > 1 + slack) && c.medianWidth <= 1.2;
      holds = holds && good;
      if (json) {
        rows.push_back({{"channel", channel.name},
                        {"circuit", std::string(description::name(channel.circuit))},
                        {"quantity", c.quantity},
                        {"racks", c.racks},
                        {"gum_percent", c.gum_percent},
                        {"monte_carlo_percent", std::isnan(c.monteCarlo_percent)
                                                    ? boost::json::value()
                                                    : boost::json::value(c.monteCarlo_percent)},
                        {"median_width", c.medianWidth},
                        {"holds", good}});
        continue;
      }
      std::cout << fmt::format("{:<8} {:<22} {:<24} GUM {:6.2f}  JCGM 101 {:6.2f}  width {:5.2f}{}\n",
                               channel.name, description::name(channel.circuit), c.quantity, c.gum_percent,
                               c.monteCarlo_percent, c.medianWidth, good ? "" : "  DOES NOT HOLD");
      std::cout.flush();
    }
  }
  const int few = std::min(racks, 1000);
  const auto dominated = dev::dominanceOf(rack, few, static_cast<std::uint64_t>(first));
  if (!dominated) {
    std::cerr << dominated.error().text() << '\n';
    return cli::kBadUse;
  }
  boost::json::array inputs;
  if (!json)
    std::cout << "one input outweighs all others, " << few << " racks each, shares inside in percent\n";
  for (const auto& d : *dominated) {
    const double slack = 300 * std::sqrt(0.9545 * 0.0455 / few);
    const bool good = d.stated_percent >= 94.45 - slack && d.halved_percent < 94.45 - slack;
    holds = holds && good;
    inputs.push_back({{"input", d.input},
                      {"channel", d.channel},
                      {"quantity", d.quantity},
                      {"racks", d.racks},
                      {"stated_percent", d.stated_percent},
                      {"halved_percent", d.halved_percent},
                      {"holds", good}});
    if (!json) {
      std::cout << fmt::format("{:<36} {:<7} {:<24} as it is {:6.2f}  halved {:6.2f}{}\n", d.input, d.channel,
                               d.quantity, d.stated_percent, d.halved_percent, good ? "" : "  DOES NOT HOLD");
    }
  }
  if (json) {
    std::cout << boost::json::serialize(boost::json::object{
                     {"campaign", "coverage"}, {"rows", rows}, {"inputs", inputs}, {"holds", holds}})
              << '\n';
  } else {
    std::cout << (holds ? "holds" : "DOES NOT HOLD") << '\n';
  }
  return holds ? 0 : 1;
}

}  // namespace
}  // namespace shuntwright

int main(int argc, char** argv) {
  using namespace shuntwright;
  CLI::App app{"Runs a campaign of the project and checks its promise."};
  std::string campaign, only;
  bool full = false, json = false;
  int first = 1;
  app.add_option("NAME", campaign, "demo or coverage")
      ->required()
      ->check(CLI::IsMember({"demo", "coverage"}));
  app.add_flag("--full", full,
               "demo: 200 seeds instead of 40; coverage: 10 000 racks a circuit instead of 300");
  app.add_option("--first", first, "The first seed; 1 is what the promise speaks of")
      ->check(CLI::Range(1, 1'000'000));
  app.add_option("--channel", only, "coverage: only this channel of the rack of every circuit");
  app.add_flag("--json", json, "One JSON document");
  CLI11_PARSE(app, argc, argv);
  const bool coverage = campaign == "coverage";
  description::Diagnostics diagnostics;
  const std::string file =
      cli::profilesFolder() + (coverage ? "/racks/every_circuit.toml" : "/racks/gantry_beam.toml");
  auto rack = description::loadRack(file, description::diskReader(), diagnostics);
  if (!rack) {
    std::cerr << diagnostics.render(false);
    return cli::kBadUse;
  }
  if (coverage) return coverageCampaign(*rack, only, first, full ? 10'000 : 300, json);
  return demoCampaign(*rack, first, full ? 200 : 40, json);
}
