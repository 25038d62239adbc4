#pragma once

#include <cstdint>
#include <functional>
#include <optional>
#include <string>

#include "driver/core/task.h"
#include "driver/description/rack.h"
#include "driver/rack/live_rack.h"
#include "tools/cli/console.h"

namespace CLI {
class App;
}

namespace shuntwright::cli {

/// Options that every command with devices has.
struct BenchOptions {
  std::string rackFile;
  std::string traceFile;   ///< --trace: what goes over the wires is written here
  std::string replayFile;  ///< --replay: plays such a file in place of the devices, in virtual time
  std::uint64_t seed = 0;  ///< --seed: of the record's id; 0: by chance, in a replay from its start
  void addTo(CLI::App& app);
};

/// Folders of this user and machine.
std::string stateFolder();  ///< $XDG_STATE_HOME/shuntwright or ~/.local/state/shuntwright
std::string lockFolder();   ///< common to all users of the machine

/// Files of a rack in the state folder.
std::string journalPath(const description::Rack& rack);
std::string openAllPath(const description::Rack& rack);
std::string calibrationPath(const description::Rack& rack);  ///< the record in force

/// Whether a trace is played in place of every device: by --replay, or since all ports are `replay:`. Runs in virtual
/// time then, and leaves nothing in the state folder.
bool isReplay(const BenchOptions& options, const description::Rack& rack);

/// Loads and checks the rack; prints every problem. Nothing when it has errors.
std::optional<description::Rack> loadRackFor(const Console& console, const std::string& file);

/// What a session gives its body besides the rack.
struct SessionContext {
  rack::LiveRack& live;
  std::uint64_t seed;
  const bool& stopAsked;   ///< SIGINT or SIGTERM came (only with stopGently)
};

/// Opens the rack and runs a coroutine on it. SIGINT and SIGTERM cancel it (or, with `stopGently`, set
/// stopAsked for the first and cancel at the second); whoever closes relays does so under rack::withRelays.
/// Writes the open-all script before anything else is sent. Returns an exit code; errors are printed.
int runOnBench(const Console& console, const description::Rack& rack, const BenchOptions& options, bool stopGently,
               std::function<Task<Result<int>>(SessionContext)> body);

/// Permit for a command: --isolated, or the answer of a person at the terminal, or refused.
Result<rack::LoadPathPermit> askForPermit(const Console& console, const description::Rack& rack, bool isolated);

/// Writes a whole file through a temporary one, so that no reader sees half of it. Errors: io.
Result<void> writeFile(const std::string& path, const std::string& text);
Result<std::string> readFile(const std::string& path);

}  // namespace shuntwright::cli
