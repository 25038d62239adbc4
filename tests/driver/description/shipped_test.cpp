// Every profile and rack that the project ships loads without a problem, and the demo rack is what it says.
#include <gtest/gtest.h>

#include <filesystem>
#include <map>
#include <set>

#include "driver/description/load.h"

namespace {

using namespace shuntwright;
using namespace shuntwright::description;
namespace fs = std::filesystem;

const fs::path kProfiles = fs::path(SHUNTWRIGHT_SOURCE_DIR) / "profiles";

Rack rackNamed(const std::string& file) {
  Diagnostics d;
  auto rack = loadRack((kProfiles / "racks" / file).string(), diskReader(), d);
  EXPECT_TRUE(rack) << d.render(false);
  return rack ? *std::move(rack) : Rack{};
}

TEST(Shipped, everyFileLoadsAndSaysThatItIsInvented) {
  int files = 0;
  for (const auto& entry : fs::recursive_directory_iterator(kProfiles)) {
    if (entry.path().extension() != ".toml") continue;
    if (entry.path().stem().extension() == ".sim") continue;  // a scenario of the simulator: tests/sim/fault
    ++files;
    const std::string file = entry.path().string();
    const std::string text = diskReader()(file).value();
    Diagnostics d;
    std::string title;
    if (kindOfFile(text) == "profile") {
      if (const auto profile = loadProfile(file, diskReader(), d)) title = profile->title;
    } else {
      if (const auto rack = loadRack(file, diskReader(), d)) title = rack->title;
    }
    EXPECT_TRUE(d.problems().empty()) << d.render(false);
    EXPECT_TRUE(text.starts_with("# INVENTED")) << file;
    EXPECT_TRUE(title.starts_with("Invented")) << file;
  }
  EXPECT_GE(files, 6);
}

TEST(Shipped, theDemoRackIsTheOneOfItsScenario) {
  const Rack rack = rackNamed("gantry_beam.toml");
  std::map<CircuitKind, int> circuits;
  std::set<RelayRef> relays;
  std::set<std::string> resistors;
  int rosette = 0, temperatures = 0;
  for (const Channel& channel : rack.channels) {
    ++circuits[channel.circuit];
    rosette += channel.group.starts_with("rosette");
    temperatures += channel.transducer && channel.transducer->unit == "degC";
    for (const Shunt& shunt : channel.shunts) {
      relays.insert(shunt.relay);
      resistors.insert(shunt.resistor);
      EXPECT_EQ(rack.resistorOf(shunt).tolerance, 0.1 * units::percent);
    }
    if (channel.circuit != CircuitKind::quarter_3_wire) continue;
    EXPECT_TRUE(channel.measuredResistance) << channel.name;
    for (const auto& [terminal, lead] : channel.leads) {
      EXPECT_GE(lead.length, 8.0 * units::metre) << channel.name;
      EXPECT_LE(lead.length, 60.0 * units::metre) << channel.name;
      EXPECT_EQ(lead.awg, 26) << channel.name;
    }
  }
  EXPECT_EQ(rack.devices.size(), 3u);
  EXPECT_EQ(rack.channels.size(), 31u);
  EXPECT_EQ(circuits[CircuitKind::quarter_3_wire], 24 + 3);
  EXPECT_EQ(rosette, 3);
  EXPECT_EQ(circuits[CircuitKind::half_bending], 2);
  EXPECT_EQ(circuits[CircuitKind::transducer], 2);  // load cell and temperature
  EXPECT_EQ(temperatures, 1);
  EXPECT_EQ(relays.size(), 30u);
  EXPECT_EQ(resistors.size(), 30u);  // each relay has its own
  int streaming = 0, inputs = 0, boards = 0;
  for (const Device& device : rack.devices) {
    streaming += device.profile->inputs && device.profile->inputs->streams();
    inputs += device.profile->inputs ? device.profile->inputs->count : 0;
    boards += device.profile->relays && device.profile->relays->count == 32;
  }
  EXPECT_EQ(streaming, 1);
  EXPECT_EQ(inputs, 32);
  EXPECT_EQ(boards, 1);
}

TEST(Shipped, theSmallBenchHasFourKindsOfCircuit) {
  std::set<CircuitKind> kinds;
  for (const Channel& channel : rackNamed("small_bench.toml").channels) kinds.insert(channel.circuit);
  EXPECT_EQ(kinds.size(), 4u);
}

TEST(Shipped, theLeadPositionsRackHasEveryPosition) {
  std::set<std::tuple<Terminal, Terminal, Side>> positions;
  for (const Channel& channel : rackNamed("lead_positions.toml").channels) {
    for (const auto& [terminal, lead] : channel.leads) EXPECT_EQ(lead.resistance, 5.0 * units::ohm);
    const Shunt& shunt = channel.shunts.at(0);
    positions.emplace(shunt.across.first, shunt.across.second, shunt.side);
  }
  EXPECT_EQ(positions.size(), 5u);
}

TEST(DiskReader, givesNothingForWhatIsNotThere) {
  EXPECT_EQ(diskReader()("/nonexistent/file.toml"), std::nullopt);
  EXPECT_EQ(diskReader()(kProfiles.string()), std::nullopt);  // a folder
}

}  // namespace
