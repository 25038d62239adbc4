// shuntwright-sim: serves every device of a rack as a simulated one, for other programs to talk to.
#include <CLI/CLI.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/signal_set.hpp>
#include <boost/json/array.hpp>
#include <boost/json/object.hpp>
#include <boost/json/serialize.hpp>
#include <filesystem>
#include <iostream>

#include "driver/description/load.h"
#include "sim/amplifier/bench.h"
#include "sim/fault/scenario_file.h"
#include "tools/cli/console.h"
#include "tools/simhost/hosting.h"
#include "tools/simhost/serve.h"

namespace {

using namespace shuntwright;

struct Options {
  std::string rack, scenario, faults, ptyFolder;
  std::uint64_t seed = 1;
  double speed = 1, loadAfter_s = -1;
  int portBase = 0;
  bool json = false;
};

Result<std::vector<simhost::Served>> serveAll(simhost::Hosting& hosting, const description::Rack& rack,
                                              const Options& options) {
  std::vector<simhost::Served> served;
  int offset = 0;
  for (const auto& device : rack.devices) {
    Result<simhost::Served> one;
    if (!options.ptyFolder.empty()) {
      one = hosting.onPty(device.name, options.ptyFolder + "/" + device.name);
    } else if (device.port.kind == description::Port::Kind::serial) {
      one = hosting.onPty(device.name, device.port.path);
    } else {
      const int stated = device.port.tcpPort != 0 ? device.port.tcpPort : device.profile->tcp ? device.profile->tcp->port : 0;
      one = hosting.onTcp(device.name, options.portBase > 0 ? options.portBase + offset++ : stated);
    }
    if (!one) return std::unexpected(std::move(one.error()));
    served.push_back(std::move(*one));
  }
  return served;
}

int run(const Options& options) {
  const cli::Console console = cli::processConsole();
  description::Diagnostics diagnostics;
  auto rack = description::loadRack(options.rack, description::diskReader(), diagnostics);
  sim::Scenario scenario;
  for (const auto& file : {options.scenario, options.faults}) {
    if (file.empty()) continue;
    const auto text = description::diskReader()(file);
    if (!text) {
      diagnostics.error(Place{file}, "the file cannot be read", "check the path");
    } else if (rack) {
      scenario = sim::parseScenario(*text, file, *rack, diagnostics, std::move(scenario));
    }
  }
  if (!diagnostics.problems().empty()) console.err << diagnostics.render(console.colour && console.errIsTerminal);
  if (!rack || !diagnostics.ok()) return cli::kBadUse;

  boost::asio::io_context context;
  RealClock real(context);
  simhost::ScaledClock clock(real, options.speed);
  sim::Bench bench(*rack, scenario, options.seed, clock.now());
  if (options.loadAfter_s >= 0) bench.startLoad(clock.now() + fromSeconds(options.loadAfter_s));
  if (!options.ptyFolder.empty()) {
    std::error_code ec;
    std::filesystem::create_directories(options.ptyFolder, ec);
    if (ec) return console.fail(Error{ErrorCode::io, "cannot make the folder: " + ec.message(), options.ptyFolder});
  }
  simhost::Hosting hosting(context, bench, clock);
  auto served = serveAll(hosting, *rack, options);
  if (!served) return console.fail(served.error());
  if (options.json) {
    boost::json::array devices;
    for (const auto& s : *served) {
      boost::json::object o;
      o["name"] = s.device;
      o["port"] = s.port;
      devices.push_back(std::move(o));
    }
    boost::json::object o;
    o["ready"] = true;
    o["devices"] = std::move(devices);
    std::cout << boost::json::serialize(o) << std::endl;
  } else {
    for (const auto& s : *served) std::cout << s.device << "  " << s.port << '\n';
    std::cout << "ready (seed " << options.seed << "); stop with Ctrl-C" << std::endl;
  }
  boost::asio::signal_set signals(context, SIGINT, SIGTERM);
  signals.async_wait([&context](boost::system::error_code, int) { context.stop(); });
  context.run();
  return cli::kPassed;
}

}  // namespace

int main(int argc, char** argv) {
  CLI::App app{"Serves every device of a rack as a simulated one, on TCP ports of this machine or on pseudo terminals."};
  app.footer("Example:\n  shuntwright-sim profiles/racks/small_bench.toml --seed 7\nExit codes: 0 stopped, 2 bad use or bad "
             "file, 3 I/O failure.");
  app.set_version_flag("--version", "shuntwright-sim " SHUNTWRIGHT_VERSION);
  Options options;
  app.add_option("RACK", options.rack, "The rack (TOML)")->required();
  app.add_option("--seed", options.seed, "Seed of the simulated truth");
  app.add_option("--scenario", options.scenario, "Imperfections, specimen, load programme and faults (TOML)");
  app.add_option("--faults", options.faults, "A second such file, laid over the scenario");
  app.add_option("--speed", options.speed, "How many times faster than real time")->check(CLI::PositiveNumber);
  app.add_option("--start-load-after", options.loadAfter_s, "Start the load programme this many seconds from now")
      ->check(CLI::NonNegativeNumber);
  app.add_option("--pty", options.ptyFolder, "Serve on pseudo terminals, linked in this folder by device name");
  app.add_option("--port-base", options.portBase, "Serve on TCP ports from this one on instead of the rack's")
      ->check(CLI::Range(1, 65000));
  app.add_flag("--json", options.json, "Print the ports as one JSON document");
  try {
    app.parse(argc, argv);
  } catch (const CLI::ParseError& e) {
    return app.exit(e) == 0 ? shuntwright::cli::kPassed : shuntwright::cli::kBadUse;
  }
  return run(options);
}
