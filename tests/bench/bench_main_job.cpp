// Each figure beside its limit, in one run: the correction kernel beside memcpy, a calibration in virtual time beside
// the time it would really take.
#include <algorithm>
#include <chrono>
#include <cstdio>
#include <cstring>
#include <ctime>
#include <string_view>
#include <vector>

#include "driver/core/random.h"
#include "driver/correction/kernel.h"
#include "driver/description/load.h"
#include "tools/cli/demo_run.h"

namespace {

using namespace shuntwright;

double processor_s() {
  timespec now{};
  ::clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &now);
  return static_cast<double>(now.tv_sec) + 1e-9 * static_cast<double>(now.tv_nsec);
}

double median(std::vector<double> values) {
  std::sort(values.begin(), values.end());
  return values[values.size() / 2];
}

void kernelBesideMemcpy(std::size_t inputs) {
  const std::size_t total = (256u << 20) / sizeof(float) / inputs * inputs;
  std::vector<float> ratio(total, 1e-3f), out(total);
  std::vector<correction::Coefficients> columns(inputs, {2e6f, 1e-4f, -2.0f});
  const correction::Kernel kernel(columns);
  std::vector<double> ours, theirs;
  std::memcpy(out.data(), ratio.data(), total * sizeof(float));
  for (int round = 0; round < 7; ++round) {
    double start = processor_s();
    kernel.apply(ratio.data(), out.data(), total / inputs);
    ours.push_back(processor_s() - start);
    start = processor_s();
    std::memcpy(out.data(), ratio.data(), total * sizeof(float));
    theirs.push_back(processor_s() - start);
  }
  std::printf("correction kernel / memcpy, 256 MiB, %3zu channels   %.2f\n", inputs, median(theirs) / median(ours));
}

void calibrationBesideRealTime() {
  description::Diagnostics diagnostics;
  auto rack = description::loadRack(cli::profilesFolder() + "/racks/gantry_beam.toml", description::diskReader(), diagnostics);
  if (!rack) {
    std::fputs(diagnostics.render(false).c_str(), stderr);
    return;
  }
  const auto scenario = cli::demoScenario(*rack);
  if (!scenario) {
    std::fputs(scenario.error().text().c_str(), stderr);
    return;
  }
  std::vector<double> ratios;
  for (std::uint64_t seed = 1; seed <= 7; ++seed) {
    cli::DemoOptions options;
    options.seed = seed;
    double started = processor_s(), calibrated = 0;
    options.progress = [&](const calibration::Progress&) { calibrated = processor_s(); };
    auto run = cli::runDemo(*rack, *scenario, options);
    if (!run) {
      std::fputs(run.error().text().c_str(), stderr);
      return;
    }
    ratios.push_back(seconds(run->calibration.duration) / (calibrated - started));
  }
  std::printf("calibration of 31 channels x 100 S/s, real duration / processor time   %.0f\n", median(ratios));
}

}  // namespace

/// All of them, or the one that is named: "kernel", "calibration".
int main(int argc, char** argv) {
  const std::string_view only = argc > 1 ? argv[1] : "";
  if (only != "calibration") {
    for (const std::size_t inputs : {1u, 16u, 256u}) kernelBesideMemcpy(inputs);
  }
  if (only != "kernel") calibrationBesideRealTime();
}
