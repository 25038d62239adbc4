// proves P-07
// The simulator in one process, the program in another: through the real serial code (pseudo terminals) and TCP.
#include <gtest/gtest.h>
#include <sys/wait.h>
#include <unistd.h>

#include <boost/json/parse.hpp>
#include <boost/json/value.hpp>
#include <cmath>
#include <csignal>
#include <cstdio>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <sstream>

#include "driver/calibration/record_json.h"
#include "driver/recording/reader.h"
#include "tests/support/run_program.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright {
namespace {

using test::Ran;

class Processes : public ::testing::Test {
 protected:
  void SetUp() override {
    char pattern[] = "/tmp/shuntwright-processes-XXXXXX";
    folder_ = ::mkdtemp(pattern);
    ::setenv("XDG_STATE_HOME", (folder_ + "/state").c_str(), 1);
  }
  void TearDown() override {
    if (simulator_ > 0) {
      ::kill(simulator_, SIGTERM);
      ::waitpid(simulator_, nullptr, 0);
    }
    std::filesystem::remove_all(folder_);
  }

  /// The small bench with its ports on pseudo terminals in our folder.
  std::string serialRack() {
    std::ifstream in(std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles/racks/small_bench.toml");
    std::stringstream text;
    text << in.rdbuf();
    std::string rack = text.str();
    const auto replace = [&rack](const std::string& from, const std::string& to) {
      for (auto at = rack.find(from); at != std::string::npos; at = rack.find(from, at + to.size())) {
        rack.replace(at, from.size(), to);
      }
    };
    replace("tcp:127.0.0.1:47011", "serial:" + folder_ + "/amp1");
    replace("tcp:127.0.0.1:47012", "serial:" + folder_ + "/relays1");
    replace("../", std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles/");
    const std::string path = folder_ + "/rack.toml";
    std::ofstream(path) << rack;
    return path;
  }

  void simulate(const std::string& rack, const std::string& more = "") {
    const std::string log = folder_ + "/sim.log";
    simulator_ = ::fork();
    if (simulator_ == 0) {
      const std::string command = "exec " SHUNTWRIGHT_BIN_DIR "/shuntwright-sim " + rack + " --seed 21 " + more + " > " + log + " 2>&1";
      ::execl("/bin/sh", "sh", "-c", command.c_str(), nullptr);
      ::_exit(127);
    }
    for (int k = 0; k < 200; ++k) {
      std::ifstream in(log);
      std::stringstream text;
      text << in.rdbuf();
      if (text.str().find("ready") != std::string::npos) return;
      ::usleep(50000);
    }
    FAIL() << "the simulator did not come up";
  }

  static Ran run(const std::string& arguments) { return test::runShuntwright(arguments); }

  /// Starts a calibration in a process of its own and waits until its journal says that a relay is closed.
  pid_t calibrateUntilARelayIsClosed(const std::string& rack) {
    const pid_t child = ::fork();
    if (child == 0) {
      const std::string command = "exec " SHUNTWRIGHT_BIN_DIR "/shuntwright calibrate " + rack + " --isolated > " + folder_ +
                                  "/out 2> " + folder_ + "/err < /dev/null";
      ::execl("/bin/sh", "sh", "-c", command.c_str(), nullptr);
      ::_exit(127);
    }
    for (int k = 0; k < 400; ++k) {
      ::usleep(25000);
      std::error_code ec;
      for (const auto& entry : std::filesystem::directory_iterator(folder_ + "/state/shuntwright", ec)) {
        if (entry.path().extension() == ".relays" && entry.file_size(ec) > 0) return child;
      }
    }
    ADD_FAILURE() << "no relay closed";
    return child;
  }

  std::string folder_;
  pid_t simulator_ = 0;
};

TEST_F(Processes, throughPseudoTerminalsTheVerdictsAreThoseInMemory) {
  const std::string rack = serialRack();
  simulate(rack);
  const Ran ran = run("calibrate " + rack + " --isolated --json");
  ASSERT_EQ(ran.code, 0) << ran.out;
  auto record = calibration::parseRecordJson(ran.out, "stdout");
  ASSERT_TRUE(record.has_value()) << record.error().text();

  test::VirtualBench memory(test::shippedRack("small_bench.toml"), {}, 21);
  auto expected = memory.calibrate();
  ASSERT_TRUE(expected.has_value());
  for (const auto& channel : expected->channels) {
    const auto* other = record->channel(channel.name);
    ASSERT_NE(other, nullptr);
    EXPECT_EQ(other->verdict, channel.verdict);
    const auto typeA = [](const calibration::ChannelResult& c) {
      for (const auto& line : c.budget.lines) {
        if (line.quantity.starts_with("noise")) return line.contribution_percent / 100;
      }
      return 0.0;
    };
    // Three combined type-A uncertainties, and the contact resistance, drawn anew at each closing: up to 0.1 ohm
    // in the smallest shunt resistor.
    const double limit = 3 * std::hypot(typeA(channel), typeA(*other)) + 0.1 / 59880;
    EXPECT_NEAR(other->spanRatio, channel.spanRatio, limit * channel.spanRatio) << channel.name;
  }

  // The same rack, recorded: the calibration just made is in force.
  const Ran recorded = run("record " + rack + " --isolated --json --duration 1 --out " + folder_ + "/run.h5");
  ASSERT_EQ(recorded.code, 0) << recorded.out;
  const auto o = boost::json::parse(recorded.out).as_object();
  EXPECT_GE(o.at("rows").to_number<int>(), 90);
  EXPECT_EQ(o.at("lost").to_number<int>(), 0);
  const Ran csv = run("export " + folder_ + "/run.h5");
  EXPECT_EQ(csv.code, 0);
  EXPECT_EQ(csv.out.substr(0, 33), "time,seconds,Q3 [microstrain],Q2 ");
}

TEST_F(Processes, aSecondInterruptStillEndsTheRecordingProperly) {
  const std::string rack = serialRack();
  simulate(rack);
  ASSERT_EQ(run("calibrate " + rack + " --isolated --json").code, 0);
  const std::string file = folder_ + "/twice.h5";
  const pid_t child = ::fork();
  if (child == 0) {
    const std::string command = "exec " SHUNTWRIGHT_BIN_DIR "/shuntwright record " + rack + " --isolated --out " + file +
                                " > " + folder_ + "/out 2>&1 < /dev/null";
    ::execl("/bin/sh", "sh", "-c", command.c_str(), nullptr);
    ::_exit(127);
  }
  std::uint64_t rows = 0;
  for (int k = 0; k < 400 && rows == 0; ++k) {
    ::usleep(25000);
    if (auto reader = recording::Reader::open(file)) rows = (*reader)->rows(0);
  }
  EXPECT_GT(rows, 0u);
  ::kill(child, SIGINT);
  ::usleep(2000);
  ::kill(child, SIGINT);
  ::waitpid(child, nullptr, 0);
  auto reader = recording::Reader::open(file);
  ASSERT_TRUE(reader.has_value()) << reader.error().text();
  EXPECT_TRUE((*reader)->complete());
  for (const auto& event : (*reader)->events()) EXPECT_NE(event.kind, "recovered");
}

TEST_F(Processes, withoutConfirmationNothingIsShunted) {
  const std::string rack = serialRack();
  simulate(rack);
  EXPECT_EQ(run("calibrate " + rack + " 2>&1").code, 2);
}

TEST_F(Processes, interruptingACalibrationOpensItsRelays) {
  const std::string rack = serialRack();
  simulate(rack);
  for (const int signal : {SIGINT, SIGTERM}) {
    const pid_t child = calibrateUntilARelayIsClosed(rack);
    ::kill(child, signal);
    int status = 0;
    ::waitpid(child, &status, 0);
    ASSERT_TRUE(WIFEXITED(status));
    EXPECT_EQ(WEXITSTATUS(status), 3);
    std::ifstream err(folder_ + "/err");
    std::stringstream text;
    text << err.rdbuf();
    EXPECT_NE(text.str().find("every relay is open"), std::string::npos) << text.str();
  }
}

TEST_F(Processes, releaseOpensWhatAKilledProcessLeftClosed) {
  const std::string rack = serialRack();
  simulate(rack);
  const pid_t child = calibrateUntilARelayIsClosed(rack);
  ::kill(child, SIGKILL);
  ::waitpid(child, nullptr, 0);
  const Ran ran = run("release " + rack + " --json 2> /dev/null");
  ASSERT_EQ(ran.code, 0) << ran.out;
  const auto o = boost::json::parse(ran.out).as_object();
  EXPECT_TRUE(o.at("opened").as_bool());
  EXPECT_EQ(o.at("left_by_an_earlier_run").as_array().size(), 1u);
}

}  // namespace
}  // namespace shuntwright
