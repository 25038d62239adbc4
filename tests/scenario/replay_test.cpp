// proves P-06
// A rack whose ports are traces: played in virtual time by the program, the same to the byte every time.
#include <gtest/gtest.h>

#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <sstream>

#include "driver/calibration/record_json.h"
#include "tests/support/run_program.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright {
namespace {

class ReplayedPorts : public ::testing::Test {
 protected:
  void SetUp() override {
    char pattern[] = "/tmp/shuntwright-replay-XXXXXX";
    folder_ = ::mkdtemp(pattern);
    ::setenv("XDG_STATE_HOME", (folder_ + "/state").c_str(), 1);
  }
  void TearDown() override { std::filesystem::remove_all(folder_); }

  /// The small bench with both devices on one trace.
  std::string replayRack() {
    std::ifstream in(std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles/racks/small_bench.toml");
    std::stringstream text;
    text << in.rdbuf();
    std::string rack = text.str();
    const auto replace = [&rack](const std::string& from, const std::string& to) {
      for (auto at = rack.find(from); at != std::string::npos; at = rack.find(from, at + to.size())) {
        rack.replace(at, from.size(), to);
      }
    };
    replace("tcp:127.0.0.1:47011", "replay:" + folder_ + "/bench.trace");
    replace("tcp:127.0.0.1:47012", "replay:" + folder_ + "/bench.trace");
    replace("../", std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles/");
    const std::string path = folder_ + "/rack.toml";
    std::ofstream(path) << rack;
    return path;
  }

  std::string folder_;
};

TEST_F(ReplayedPorts, theProgramGivesTheSameRecordToTheByteEveryTime) {
  test::VirtualBench world(test::shippedRack("small_bench.toml"), {}, 5);
  world.traceFile = folder_ + "/bench.trace";
  auto traced = world.calibrate();
  ASSERT_TRUE(traced.has_value()) << traced.error().text();

  const std::string command = "calibrate " + replayRack() + " --isolated --json";
  const auto first = test::runShuntwright(command);
  ASSERT_EQ(first.code, 0) << first.out;
  const auto second = test::runShuntwright(command);
  EXPECT_EQ(first.out, second.out);

  auto record = calibration::parseRecordJson(first.out, "stdout");
  ASSERT_TRUE(record.has_value()) << record.error().text();
  EXPECT_EQ(record->started, traced->started);
  EXPECT_EQ(record->duration, traced->duration);
  ASSERT_EQ(record->channels.size(), traced->channels.size());
  for (std::size_t k = 0; k < traced->channels.size(); ++k) {
    // Reading numbers back from JSON costs the last bit.
    EXPECT_NEAR(record->channels[k].spanRatio, traced->channels[k].spanRatio, 1e-15)
        << traced->channels[k].name;
  }
  EXPECT_FALSE(std::filesystem::exists(folder_ + "/state"))
      << "a replay leaves no calibration in force, and no journal";
}

}  // namespace
}  // namespace shuntwright
