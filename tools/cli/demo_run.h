#pragma once

#include <cstdint>
#include <functional>
#include <string>
#include <vector>

#include "driver/calibration/calibrate.h"
#include "driver/calibration/record.h"
#include "driver/core/error.h"
#include "driver/description/rack.h"
#include "sim/fault/scenario.h"

namespace shuntwright::cli {

/// One channel of a demo run against the simulated truth, at the hold with the largest load. All in percent of
/// the channel's largest true strain.
struct DemoChannel {
  std::string name;
  std::string unit;
  double trueValue = 0;                    ///< in `unit`
  double corrected = 0;                    ///< mean over the hold, in `unit`
  double uncorrectedError_percent = 0;     ///< the ratio's change times the textbook factor (4r/K for a quarter bridge)
  double correctedError_percent = 0;       ///< of the chain: as if the gauge factor were the true one
  double expandedUncertainty_percent = 0;  ///< of the chain
  double totalError_percent = 0;           ///< with the gauge factor's own error
  double totalExpandedUncertainty_percent = 0;
  bool gaugeResistanceMeasured = false;
  bool insideUncertainty() const;
};

struct DemoOptions {
  std::uint64_t seed = 1;
  std::string recordingPath;  ///< empty: nothing is written
  std::function<void(const calibration::Progress&)> progress;
};

struct DemoRun {
  calibration::Record calibration;  ///< with the zeros taken anew before the load
  std::vector<calibration::Finding> zeroFindings;
  std::vector<DemoChannel> channels;  ///< those with shunts
  std::uint64_t rows = 0, lost = 0;
  double simulated_s = 0;
  bool relaysOpen = false;  ///< as the simulator's own relays say
};

/// The specimen behind the shipped gantry beam: `racks/gantry_beam.sim.toml`, the file that `shuntwright-sim` reads.
/// Errors: bad_file, with every mistake in it.
Result<sim::Scenario> demoScenario(const description::Rack& rack);

/// Calibrates a rack on the simulator, waits, runs the load programme, records it, and compares with the truth;
/// all in virtual time and in one thread. Errors: those of what it runs.
Result<DemoRun> runDemo(const description::Rack& rack, const sim::Scenario& scenario, const DemoOptions& options);

/// The folder of the shipped profiles: $SHUNTWRIGHT_PROFILES, ./profiles, or beside the build tree.
std::string profilesFolder();

}  // namespace shuntwright::cli
