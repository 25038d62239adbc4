// Scenario files: every key arrives where it belongs, every mistake has its place, the shipped one fits its
// rack.
#include "sim/fault/scenario_file.h"

#include <gtest/gtest.h>

#include <cmath>

#include "sim/physics/specimen.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright::sim {
namespace {

using namespace std::chrono_literals;
using namespace units;
using description::Diagnostics;
using description::RelayRef;

class ScenarioFile : public ::testing::Test {
 protected:
  Scenario read(const std::string& text, Scenario base = {}) {
    auto scenario = parseScenario(text, "bench.sim.toml", rack_, diagnostics_, std::move(base));
    return scenario;
  }
  const description::Rack rack_ = test::shippedRack("small_bench.toml");
  Diagnostics diagnostics_;
};

TEST_F(ScenarioFile, anEmptyOneIsAHealthyBench) {
  const Scenario s = read("");
  EXPECT_TRUE(diagnostics_.problems().empty());
  EXPECT_EQ(s.levels.size(), 10u);
  EXPECT_EQ(s.imperfections.gauges, 1);
  EXPECT_TRUE(s.dead.empty() && s.welded.empty() && s.swapped.empty() && s.devices.empty() &&
              s.channels.empty());
}

TEST_F(ScenarioFile, everyKeyArrives) {
  const Scenario s = read(R"(
gauge = [{ channel = "Q3", along = "3 m", fibre = "-250 mm", angle = 45, on = "web" }]
[imperfections]
gauges = 0.5
completions = 2
leads = 3
resistors = 4
gauge_factors = 5
contacts = 6
leads_warm = false
span_tolerance = "1 %"
offset = "1 uV/V"
drift = "2 uV/V"
noise = "3 uV/V"
mains = "4 uV/V"
gauge_batches = "80 %"
self_heating = "12 microstrain"
flicker = "0.3 uV/V"
answer_delay = "7 ms"
send_every = "30 ms"
[beam]
span = "8 m"
modulus = "70 GPa"
second_moment_m4 = 1e-4
poisson = 0.33
web_area = "2000 mm2"
temperature = "15 degC"
warming = "-5 K"
warming_time = "10 min"
[load]
largest = "50 kN"
levels = [0.5, 1]
ramp = "1 s"
hold = "2 s"
)");
  EXPECT_TRUE(diagnostics_.problems().empty()) << diagnostics_.render(false);
  const auto& i = s.imperfections;
  EXPECT_EQ((std::vector<double>{i.gauges, i.completions, i.leads, i.resistors, i.gaugeFactors, i.contacts}),
            (std::vector<double>{0.5, 2, 3, 4, 5, 6}));
  EXPECT_FALSE(i.leadsWarm);
  EXPECT_DOUBLE_EQ(i.spanTolerance, 0.01);
  EXPECT_DOUBLE_EQ(i.offset.in(microvolt_per_volt), 1);
  EXPECT_DOUBLE_EQ(i.drift.in(microvolt_per_volt), 2);
  EXPECT_DOUBLE_EQ(i.noise.in(microvolt_per_volt), 3);
  EXPECT_DOUBLE_EQ(i.mains.in(microvolt_per_volt), 4);
  EXPECT_DOUBLE_EQ(i.batches, 0.8);
  EXPECT_DOUBLE_EQ(i.selfHeating.in(microstrain), 12);
  EXPECT_DOUBLE_EQ(i.flicker.in(microvolt_per_volt), 0.3);
  EXPECT_EQ(i.answerDelay, 7ms);
  EXPECT_EQ(i.sendEvery, 30ms);
  EXPECT_DOUBLE_EQ(s.beam.span.in(metre), 8);
  EXPECT_DOUBLE_EQ(s.beam.modulus.in(gigapascal), 70);
  EXPECT_DOUBLE_EQ(s.beam.secondMoment_m4, 1e-4);
  EXPECT_DOUBLE_EQ(s.beam.poisson, 0.33);
  EXPECT_DOUBLE_EQ(s.beam.webArea.in(square_millimetre), 2000);
  EXPECT_DOUBLE_EQ(s.beam.temperature.celsius(), 15);
  EXPECT_DOUBLE_EQ(s.beam.warming.in(kelvin), -5);
  EXPECT_EQ(s.beam.warmingTime, 10min);
  EXPECT_DOUBLE_EQ(s.maxLoad.in(kilonewton), 50);
  EXPECT_EQ(s.levels, (std::vector<double>{0.5, 1}));
  EXPECT_EQ(s.ramp, 1s);
  EXPECT_EQ(s.hold, 2s);
  const auto& place = s.places.at("Q3");
  EXPECT_DOUBLE_EQ(place.alongBeam.in(metre), 3);
  EXPECT_DOUBLE_EQ(place.fibre.in(millimetre), -250);
  EXPECT_EQ(place.angle_deg, 45);
  EXPECT_TRUE(place.web);
}

TEST_F(ScenarioFile, everyFaultArrives) {
  const Scenario s = read(R"(
fault = [
  { what = "relay dead", relay = "relays1/3" },
  { what = "relay welded", relay = "relays1/4" },
  { what = "relays swapped", relay = "relays1/1", with = "relays1/2" },
  { what = "wrong shunt", channel = "Q3", scale = 1.1 },
  { what = "noisy", channel = "Q3", scale = 20 },
  { what = "open lead", channel = "Q2" },
  { what = "saturated", channel = "H1" },
  { what = "no zero return", channel = "F1", strain = "30 microstrain" },
  { what = "bent", channel = "H1", per_mV_per_V = 0.002 },
  { what = "mute", device = "amp1", request = "stream start", from = 2, count = 3 },
  { what = "garbage", device = "relays1" },
  { what = "half answer", device = "relays1", request = "close" },
  { what = "error answer", device = "relays1", request = "open all" },
  { what = "late", device = "relays1", request = "state", delay = "2 s" },
  { what = "lost frames", device = "amp1", part = 0.01 },
  { what = "silent", device = "amp1", after = "5 s" },
  { what = "unplugged", device = "relays1", after = "6 s", lasting = "2 s" },
]
)");
  EXPECT_TRUE(diagnostics_.problems().empty()) << diagnostics_.render(false);
  EXPECT_EQ(s.dead, (std::set<RelayRef>{{"relays1", 3}}));
  EXPECT_EQ(s.welded, (std::set<RelayRef>{{"relays1", 4}}));
  ASSERT_EQ(s.swapped.size(), 1u);
  EXPECT_EQ(s.swapped[0], std::pair(RelayRef{"relays1", 1}, RelayRef{"relays1", 2}));
  EXPECT_EQ(s.channels.at("Q3").shuntScale, 1.1);
  EXPECT_EQ(s.channels.at("Q3").noiseScale, 20);
  EXPECT_TRUE(s.channels.at("Q2").openLead);
  EXPECT_TRUE(s.channels.at("H1").saturated);
  EXPECT_EQ(s.channels.at("H1").bend, 0.002);
  EXPECT_DOUBLE_EQ(s.channels.at("F1").noReturn.in(microstrain), 30);
  const auto& amp = s.devices.at("amp1");
  ASSERT_EQ(amp.requests.size(), 1u);
  EXPECT_EQ(amp.requests[0].request, "stream start");
  EXPECT_EQ(amp.requests[0].from, 2);
  EXPECT_EQ(amp.requests[0].count, 3);
  EXPECT_EQ(amp.lostFrames, 0.01);
  EXPECT_EQ(amp.silentAfter, 5s);
  const auto& board = s.devices.at("relays1");
  ASSERT_EQ(board.requests.size(), 4u);
  EXPECT_EQ(board.requests[0].kind, DeviceFault::Kind::garbage);
  EXPECT_EQ(board.requests[0].request, "");
  EXPECT_EQ(board.requests[1].kind, DeviceFault::Kind::half_answer);
  EXPECT_EQ(board.requests[2].kind, DeviceFault::Kind::error_answer);
  EXPECT_EQ(board.requests[3].kind, DeviceFault::Kind::late);
  EXPECT_EQ(board.requests[3].delay, 2s);
  EXPECT_EQ(board.unpluggedAfter, 6s);
  EXPECT_EQ(board.unpluggedFor, 2s);
}

TEST_F(ScenarioFile, aSecondFileIsLaidOverTheFirst) {
  Scenario base = read(
      "[imperfections]\ngauges = 0\nnoise = \"9 uV/V\"\n[[fault]]\nwhat = \"saturated\"\nchannel = \"H1\"\n");
  const Scenario s =
      read("[imperfections]\ngauges = 2\n[[fault]]\nwhat = \"relay dead\"\nrelay = \"relays1/3\"\n",
           std::move(base));
  EXPECT_TRUE(diagnostics_.problems().empty()) << diagnostics_.render(false);
  EXPECT_EQ(s.imperfections.gauges, 2);
  EXPECT_DOUBLE_EQ(s.imperfections.noise.in(microvolt_per_volt), 9);
  EXPECT_TRUE(s.channels.at("H1").saturated);
  EXPECT_EQ(s.dead.size(), 1u);
}

TEST_F(ScenarioFile, everyMistakeOfMeaningIsLocated) {
  read(R"(gauge = [{ channel = "Q9", along = "3 m", fibre = "1 kg" }]
[imperfections]
gauges = -1
leads_worm = true
[load]
levels = []
hold = "6 kN"
[[fault]]
what = "relay dad"
[[fault]]
what = "relay dead"
relay = "relays1/99"
[[fault]]
what = "mute"
device = "amp7"
request = "clse"
[[fault]]
what = "late"
device = "amp1"
)");
  std::vector<int> lines;
  for (const auto& p : diagnostics_.problems()) {
    EXPECT_EQ(p.place.file, "bench.sim.toml");
    EXPECT_GT(p.place.column, 0) << p.message;
    EXPECT_FALSE(p.remedy.empty()) << p.message;
    lines.push_back(p.place.line);
  }
  std::sort(lines.begin(), lines.end());
  EXPECT_EQ(lines, (std::vector<int>{1, 1, 3, 4, 6, 7, 9, 12, 15, 16, 17})) << diagnostics_.render(false);
}

TEST_F(ScenarioFile, aFaultOfNobodyIsToldOnceAndItsOtherKeysAreKnown) {
  for (const char* text : {"[[fault]]\nwhat = \"noisy\"\nchannel = \"Q9\"\nscale = 3\n",
                           "[[fault]]\nwhat = \"bent\"\nchannel = \"Q9\"\nper_mV_per_V = 0.1\n",
                           "[[fault]]\nwhat = \"unplugged\"\ndevice = \"amp7\"\nafter = \"6 s\"\nlasting = \"2 s\"\n"}) {
    diagnostics_ = description::Diagnostics();
    const Scenario s = read(text);
    ASSERT_EQ(diagnostics_.problems().size(), 1u) << diagnostics_.render(false);
    EXPECT_EQ(diagnostics_.problems()[0].message.substr(0, 11), "the rack ha");
    EXPECT_TRUE(s.channels.empty());
    EXPECT_TRUE(s.devices.empty());
  }
}

TEST_F(ScenarioFile, aSyntaxErrorIsToldAloneAndTheBaseStays) {
  Scenario base;
  base.imperfections.gauges = 3;
  const Scenario s = read("[load\nramp = 1 s", base);
  EXPECT_EQ(diagnostics_.problems().size(), 1u);
  EXPECT_EQ(s.imperfections.gauges, 3);
}

// The shipped scenario of the demo rack: it reads, it says that it is invented, its places give what the rack
// expects, and the three legs of its rosette are one plane state of strain: the principal strains found from
// them (textbook formula of the rectangular rosette) are those of bending and shear at that place.
TEST(ShippedScenario, fitsItsRack) {
  const auto rack = test::shippedRack("gantry_beam.toml");
  const std::string file = std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles/racks/gantry_beam.sim.toml";
  const auto text = description::diskReader()(file);
  ASSERT_TRUE(text);
  EXPECT_TRUE(text->starts_with("# INVENTED"));
  Diagnostics diagnostics;
  const Scenario s = parseScenario(*text, file, rack, diagnostics);
  EXPECT_TRUE(diagnostics.problems().empty()) << diagnostics.render(false);
  EXPECT_EQ(s.places.size(), 27u);
  const auto at = [&](const std::string& channel) {
    return beamStrain(s.beam, s.places.at(channel), s.maxLoad);
  };
  for (const auto& [name, place] : s.places) {
    const bool top = rack.channel(name)->group.find("top") != std::string::npos;
    EXPECT_EQ(at(name) < 0, top || name == "R1-90")
        << name << ": the top flange is compressed, so is what stands across";
    const double expected = rack.channel(name)->expected->in(strain);
    EXPECT_LT(std::abs(at(name)), 1.05 * expected) << name;
    EXPECT_GT(std::abs(at(name)), 0.5 * expected) << name;
  }
  const double e0 = at("R1-0"), e45 = at("R1-45"), e90 = at("R1-90");
  const double centre = (e0 + e90) / 2,
               radius = std::sqrt((std::pow(e0 - e45, 2) + std::pow(e45 - e90, 2)) / 2);
  // M = F x / 2, V = F / 2 at x = 2.7 m; e = M c / (E I), g = V / (G A_web).
  const double e = 180e3 / 2 * 2.7 * 0.27 / (210e9 * 9.2e-4), g = 90e3 / (210e9 / 2.6 * 6800e-6);
  EXPECT_NEAR(centre, 0.35 * e, 1e-12);
  EXPECT_NEAR(radius, std::hypot(0.65 * e, g / 2), 1e-12);
}

}  // namespace
}  // namespace shuntwright::sim
