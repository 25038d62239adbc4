// What every command owes to scripts and to people who mistype.
#include <gtest/gtest.h>

#include <boost/json/parse.hpp>
#include <boost/json/value.hpp>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <sstream>

#include "tests/support/run_program.h"

namespace {

namespace fs = std::filesystem;
namespace json = boost::json;

using shuntwright::test::Ran;
using shuntwright::test::runShell;
using shuntwright::test::runShuntwright;

const std::string kProfiles = std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles";
const std::string kProgram = std::string(SHUNTWRIGHT_BIN_DIR) + "/shuntwright";

class Program : public ::testing::Test {
 protected:
  void SetUp() override {
    char pattern[] = "/tmp/shuntwright-program-XXXXXX";
    folder_ = ::mkdtemp(pattern);
  }
  void TearDown() override { fs::remove_all(folder_); }

  json::object demo(const std::string& options) {
    const Ran ran =
        runShell("SHUNTWRIGHT_PROFILES=" + profiles_ + " " + kProgram + " demo --json " + options);
    EXPECT_EQ(ran.code, 0) << ran.out;
    return json::parse(ran.out).as_object();
  }
  double trueValue(const json::object& document, const std::string& name) {
    for (const auto& c : document.at("channels").as_array()) {
      if (c.at("name").as_string() == name.c_str()) return c.at("true_value").to_number<double>();
    }
    ADD_FAILURE() << name;
    return 0;
  }

  std::string folder_, profiles_ = kProfiles;
};

TEST_F(Program, aMistypedCommandIsNamedWithTheOneThatWasMeant) {
  const Ran ran = runShuntwright("chekc some.toml 2>&1");
  EXPECT_EQ(ran.code, 2);
  EXPECT_NE(ran.out.find("there is no command \"chekc\""), std::string::npos) << ran.out;
  EXPECT_NE(ran.out.find("did you mean \"check\"?"), std::string::npos) << ran.out;
}

TEST_F(Program, theDemoTellsNoRowsWhenNoRecordingIsKept) {
  EXPECT_TRUE(demo("").at("rows").is_null());
  EXPECT_GT(demo("--out " + folder_ + "/demo.h5").at("rows").to_number<double>(), 0);
}

TEST_F(Program, exportNeverOverwritesARecording) {
  const std::string file = folder_ + "/demo.h5";
  ASSERT_EQ(runShuntwright("demo --out " + file).code, 0);
  const auto size = fs::file_size(file);
  const Ran ran = runShuntwright("export " + file + " --out " + file + " 2>&1");
  EXPECT_NE(ran.code, 0);
  EXPECT_NE(ran.out.find("would overwrite a recording"), std::string::npos) << ran.out;
  EXPECT_EQ(fs::file_size(file), size);
  EXPECT_EQ(runShuntwright("export " + file + " --steps --out " + folder_ + "/steps.csv").code, 0);
}

// The demo and shuntwright-sim load one beam: half the second moment of area doubles the bending strain
// (M y / (E I)) of a channel that has a place on it, and leaves one that has none.
TEST_F(Program, theDemoLoadsTheBeamOfTheShippedScenario) {
  const auto shipped = demo("");
  fs::copy(kProfiles, folder_ + "/profiles", fs::copy_options::recursive);
  profiles_ = folder_ + "/profiles";
  const std::string file = profiles_ + "/racks/gantry_beam.sim.toml";
  std::stringstream text;
  text << std::ifstream(file).rdbuf();
  std::string altered = text.str();
  const std::string stated = "second_moment_m4 = 9.2e-4";
  const auto at = altered.find(stated);
  ASSERT_NE(at, std::string::npos);
  std::ofstream(file) << altered.replace(at, stated.size(), "second_moment_m4 = 4.6e-4");
  const auto softer = demo("");
  EXPECT_NEAR(trueValue(softer, "S13") / trueValue(shipped, "S13"), 2, 1e-9);
  EXPECT_NEAR(trueValue(softer, "F1") / trueValue(shipped, "F1"), 1, 1e-9);
}

TEST_F(Program, aShuntOnALoadCellSimulatesLoadAndNotStrain) {
  const Ran ran = runShuntwright("check --json " + kProfiles + "/racks/small_bench.toml");
  ASSERT_EQ(ran.code, 0);
  const json::value document = json::parse(ran.out);
  for (const auto& channel : document.at("channels").as_array()) {
    const auto& shunt = channel.at("shunts").at(0).as_object();
    const bool cell = channel.at("name").as_string() == "F1";
    EXPECT_EQ(shunt.at("simulated_microstrain").is_null(), cell);
    EXPECT_EQ(shunt.at("simulated_unit").as_string(), cell ? "kN" : "microstrain");
    if (cell) {
      // The step over the sensitivity of 2 mV/V, times 50 kN; the leads of 0.8 ohm take less than 1 % of it.
      const double step = shunt.at("predicted_step_mV_per_V").to_number<double>();
      EXPECT_NEAR(shunt.at("simulated_value").to_number<double>() / (step / 2 * 50), 1, 0.01);
    }
  }
}

}  // namespace
