// proves P-05, P-07
// Everything that can go wrong with a bench, in virtual time: what is said of it, and that every relay is open.
#include <gtest/gtest.h>

#include <algorithm>

#include "tests/support/virtual_bench.h"

namespace shuntwright {
namespace {

using description::RelayRef;
using test::shippedRack;
using test::VirtualBench;

/// Small bench: Q3 (quarter 3-wire), Q2 (quarter 2-wire), H1 (half bending), F1 (transducer); relays 1 to 4.
class Faults : public ::testing::Test {
 protected:
  sim::Scenario scenario;

  calibration::Record calibrate() {
    VirtualBench world(shippedRack("small_bench.toml"), scenario);
    auto record = world.calibrate();
    EXPECT_TRUE(record.has_value()) << record.error().text();
    EXPECT_TRUE(world.bench->closedRelays().empty());
    return record ? *record : calibration::Record{};
  }

  Error failToCalibrate() {
    VirtualBench world(shippedRack("small_bench.toml"), scenario);
    auto record = world.calibrate();
    EXPECT_FALSE(record.has_value());
    EXPECT_TRUE(world.bench->closedRelays().empty());
    return record ? Error{} : record.error();
  }

  static std::vector<std::string> codes(const calibration::Record& record, const std::string& channel) {
    std::vector<std::string> out;
    for (const auto& f : record.channel(channel)->findings) out.push_back(f.code);
    return out;
  }
  static void expectOnly(const calibration::Record& record, const std::string& channel, const std::string& code) {
    for (const auto& c : record.channels) {
      const auto found = codes(record, c.name);
      if (c.name == channel) {
        EXPECT_TRUE(std::find(found.begin(), found.end(), code) != found.end()) << channel << " lacks " << code;
        EXPECT_EQ(c.verdict, calibration::Verdict::fail);
      } else {
        EXPECT_TRUE(found.empty()) << c.name << " has " << found.front();
      }
    }
  }
};

TEST_F(Faults, aDeadRelayIsSeenByItsReadBack) {
  scenario.dead = {{"relays1", 1}};
  expectOnly(calibrate(), "Q3", "relay-error");
}

TEST_F(Faults, aWrongShuntValueIsOutOfLimits) {
  scenario.channels["Q3"].shuntScale = 1.1;
  expectOnly(calibrate(), "Q3", "span-deviates");
}

TEST_F(Faults, aNoisyChannelIsNamed) {
  scenario.channels["H1"].noiseScale = 200;
  const auto record = calibrate();
  const auto found = codes(record, "H1");
  EXPECT_TRUE(std::find(found.begin(), found.end(), "noisy") != found.end());
}

TEST_F(Faults, aSaturatedChannelIsNamed) {
  scenario.channels["Q2"].saturated = true;
  expectOnly(calibrate(), "Q2", "saturated");
}

TEST_F(Faults, aReadingThatDoesNotReturnIsNamed) {
  scenario.channels["Q3"].noReturn = 30.0 * units::microstrain;
  expectOnly(calibrate(), "Q3", "no-zero-return");
}

TEST_F(Faults, swappedRelaysShowNoStepOrAWrongOne) {
  scenario.swapped = {{{"relays1", 1}, {"relays1", 3}}};
  const auto record = calibrate();
  EXPECT_EQ(record.channel("Q3")->verdict, calibration::Verdict::fail);
  EXPECT_EQ(record.channel("H1")->verdict, calibration::Verdict::fail);
  EXPECT_EQ(codes(record, "Q3").front(), "step-missing");
}

TEST_F(Faults, aWeldedRelayIsNamedInTheRecordAndInTheBook) {
  scenario.welded = {{"relays1", 2}};
  VirtualBench world(shippedRack("small_bench.toml"), scenario);
  auto record = world.calibrate();
  ASSERT_TRUE(record.has_value()) << record.error().text();
  EXPECT_EQ(record->relaysMaybeClosed, (std::vector<std::string>{"relays1/2"}));
  EXPECT_FALSE(record->passed());
  EXPECT_EQ(record->channel("Q2")->findings.front().code, "relay-error");
  EXPECT_EQ(world.journal.unresolved(), (std::set<RelayRef>{{"relays1", 2}}));
}

sim::DeviceFaults from(sim::DeviceFault::Kind kind, std::string request, int nth) {
  sim::DeviceFaults faults;
  sim::DeviceFault fault;
  fault.kind = kind;
  fault.request = std::move(request);
  fault.from = nth;
  faults.requests.push_back(fault);
  return faults;
}

TEST_F(Faults, aDeviceThatAnswersNothingIsNamedWithItsRequest) {
  scenario.devices["relays1"] = from(sim::DeviceFault::Kind::mute, "close", 2);
  const Error error = failToCalibrate();
  const std::string text = error.text();
  EXPECT_NE(text.find("relays1"), std::string::npos) << text;
  EXPECT_NE(text.find("CLOSE"), std::string::npos) << text;
}

TEST_F(Faults, garbageIsQuoted) {
  scenario.devices["relays1"] = from(sim::DeviceFault::Kind::garbage, "close", 2);
  const std::string text = failToCalibrate().text();
  EXPECT_NE(text.find("relays1"), std::string::npos) << text;
  EXPECT_NE(text.find("\\x7f"), std::string::npos) << text;
}

TEST_F(Faults, halfAnAnswerIsToldFromNone) {
  scenario.devices["relays1"] = from(sim::DeviceFault::Kind::half_answer, "state", 3);
  const std::string text = failToCalibrate().text();
  EXPECT_NE(text.find("half an answer"), std::string::npos) << text;
}

TEST_F(Faults, anErrorAnswerIsAFindingOfItsChannel) {
  scenario.devices["relays1"] = from(sim::DeviceFault::Kind::error_answer, "close", 2);
  scenario.devices["relays1"].requests[0].count = 1;
  const auto record = calibrate();
  int errors = 0;
  for (const auto& c : record.channels) {
    for (const auto& f : c.findings) errors += f.code == "relay-error";
  }
  EXPECT_EQ(errors, 1);
}

TEST_F(Faults, anAmplifierThatFallsSilentEndsTheCalibrationWithOpenRelays) {
  scenario.devices["amp1"].silentAfter = std::chrono::seconds(4);
  const std::string text = failToCalibrate().text();
  EXPECT_NE(text.find("amp1"), std::string::npos) << text;
}

TEST_F(Faults, lostFramesDoNotSpoilACalibration) {
  scenario.devices["amp1"].lostFrames = 0.02;
  for (const auto& c : calibrate().channels) EXPECT_NE(c.verdict, calibration::Verdict::fail) << c.name;
}

// Interruption at every step of the clock of a whole calibration (each await ends at one of them).
TEST(Interrupted, relaysAreOpenWhereverTheCalibrationIsCancelled) {
  std::size_t total = 0;
  {
    VirtualBench whole(shippedRack("small_bench.toml"));
    ASSERT_FALSE(whole.calibrateCancelledAfter(static_cast<std::size_t>(-1)).has_value());
    total = whole.stepsTaken();
  }
  ASSERT_GT(total, 300u);
  std::size_t cancelled = 0;
  for (std::size_t at = 0; at < total; ++at) {
    VirtualBench world(shippedRack("small_bench.toml"));
    const auto thrown = world.calibrateCancelledAfter(at);
    if (thrown) ++cancelled;
    ASSERT_TRUE(world.bench->closedRelays().empty()) << "cancelled at step " << at;
    ASSERT_TRUE(world.journal.unresolved().empty()) << "cancelled at step " << at;
  }
  EXPECT_GT(cancelled, total / 2);
}

// The same between any two handlers of the event loop, so at every single await, also where several end at one moment.
// A small calibration has all of them: two amplifier channels, one repeat, short windows.
TEST(Interrupted, relaysAreOpenWhicheverAwaitIsCancelled) {
  auto rack = shippedRack("small_bench.toml");
  rack.channels.resize(2);
  rack.calibration.repeats = 1;
  rack.calibration.windowSamples = 4;
  constexpr auto kGrain = VirtualBench::Grain::handler;
  std::size_t total = 0;
  {
    VirtualBench whole(rack);
    ASSERT_FALSE(whole.calibrateCancelledAfter(static_cast<std::size_t>(-1), kGrain).has_value());
    total = whole.stepsTaken();
  }
  ASSERT_GT(total, 300u);
  RecordProperty("awaits", static_cast<int>(total));
  std::size_t cancelled = 0;
  for (std::size_t at = 0; at < total; ++at) {
    VirtualBench world(rack);
    if (world.calibrateCancelledAfter(at, kGrain)) ++cancelled;
    ASSERT_TRUE(world.bench->closedRelays().empty()) << "cancelled before handler " << at;
    ASSERT_TRUE(world.journal.unresolved().empty()) << "cancelled before handler " << at;
  }
  EXPECT_GT(cancelled, total / 2);
}

}  // namespace
}  // namespace shuntwright
