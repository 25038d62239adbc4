// What follows from channels, sample by sample, against readings worked out by hand.
#include "driver/correction/derived_channels.h"

#include <gtest/gtest.h>

#include <cmath>

#include "driver/calibration/basis.h"
#include "tests/driver/description/sample.h"

namespace shuntwright::correction {
namespace {

using namespace std::chrono_literals;
using namespace units;

constexpr double kPerStrain =
    2.0;  ///< every channel's map is strain = 2 r here, so r = 500e-6 shows 1000 microstrain

std::string rackText(const std::string& gaugeKeys, const std::string& channelKeys, const std::string& tables,
                     const std::string& circuit = "quarter 3-wire") {
  std::string text = sample::spoilt(sample::kRack, "factor = 2.1\n", "factor = 2.0\n" + gaugeKeys + "\n");
  text = sample::spoilt(text, "rated_value = 50, unit = \"kN\"", "rated_value = 100, unit = \"degC\"");
  text = sample::spoilt(text,
                        "excitation = \"5 V\"\nshunts = [{ name = \"cal\", resistor = \"RC\", relay = "
                        "\"amp1/1\", across = \"completion\" }]\n",
                        channelKeys + "\n");
  text = sample::spoilt(text, "circuit = \"quarter 3-wire\"", "circuit = \"" + circuit + '"');
  if (circuit != "quarter 3-wire")
    text = sample::spoilt(text, "leads = { length = \"20 m\", awg = 26 }", "leads = { each = \"1 ohm\" }");
  for (const std::string input : {"3", "4"}) {
    text += "\n[[channel]]\nname = \"S0" + input + "\"\ndevice = \"amp1\"\ninput = " + input +
            "\ncircuit = \"quarter 3-wire\"\ngauge = \"G350\"\nleads = { each = \"1 ohm\" }\n";
  }
  return text + tables;
}

/// One rack with a record, fed with one frame at a time.
class Bench {
 public:
  explicit Bench(const std::string& text, double zeroTemperature_C = 20) {
    description::Diagnostics d;
    auto loaded = description::loadRack(
        "b/rack.toml", sample::reader({{"b/rack.toml", text}, {"p/device.toml", sample::kProfile}}), d);
    EXPECT_TRUE(loaded && d.problems().empty()) << d.render(false);
    rack = *std::move(loaded);
    record.rackName = rack.name;
    for (const auto& channel : rack.channels) {
      calibration::ChannelResult result;
      result.name = channel.name;
      result.basis = calibration::basisOf(rack, channel);
      result.verdict = calibration::Verdict::pass;
      result.correction.p = kPerStrain;
      if (channel.transducer) {
        result.unit = "degC";
        result.unitsPerStrain = 100;
        result.zero = zeroTemperature_C / 100 / kPerStrain * volt_per_volt;
      }
      record.channels.push_back(result);
    }
    corrections.push_back(*LiveCorrection::of(rack, record, "amp1"));
    auto made = DerivedChannels::of(rack, record, corrections);
    EXPECT_TRUE(made) << made.error().text();
    derived = std::move(*made);
  }

  /// Shows S01, S03 and S04 (microstrain) and the thermometer F1; the row with what follows.
  std::vector<float> show(double s01, double s03, double s04, double celsius, Nanoseconds at = 0ns,
                          std::vector<std::uint8_t> flags = {0, 0, 0, 0}) {
    device::SampleBlock block;
    block.inputs = 4;
    block.time = {Instant(at)};
    block.ratio = {static_cast<float>(s01 * 1e-6 / kPerStrain),
                   static_cast<float>(celsius / 100 / kPerStrain),
                   static_cast<float>(s03 * 1e-6 / kPerStrain), static_cast<float>(s04 * 1e-6 / kPerStrain)};
    block.flags = std::move(flags);
    std::vector<float> corrected(4);
    corrections[0].apply(block, corrected);
    std::vector<float> row;
    derived.apply(0, block, corrected, widened, row);
    return row;
  }

  std::vector<std::string> names() const {
    std::vector<std::string> out;
    for (const auto& column : derived.columns(0)) out.push_back(column.name + " " + column.unit);
    return out;
  }

  description::Rack rack;
  calibration::Record record;
  std::vector<LiveCorrection> corrections;
  DerivedChannels derived;
  device::SampleBlock widened;
};

using Names = std::vector<std::string>;

const std::string kPacket = "thermal_output = { coefficients = [0, 3, -0.05], factor = 2.2 }";

TEST(DerivedChannels, NoneWhereNothingIsAsked) {
  Bench bench(rackText(kPacket, "", ""));
  EXPECT_TRUE(bench.derived.columns(0).empty());
  EXPECT_FALSE(bench.derived.wants(0));
}

// P(50) - P(20) = (150 - 125) - (60 - 20) = -15 microstrain at 2.2: 1.1 times that at the channel's factor
// of 2.
TEST(DerivedChannels, ThermalOutputIsTakenOut) {
  Bench bench(rackText(kPacket, "temperature = \"F1\"", ""));
  ASSERT_EQ(bench.names(), Names{"S01.mechanical microstrain"});
  EXPECT_NEAR(bench.show(700 - 16.5, 0, 0, 50)[4], 700, 1e-3);
  EXPECT_NEAR(bench.show(300, 0, 0, 20)[4], 300, 1e-3);
  EXPECT_NEAR(bench.show(700 - 16.5, 0, 0, 50)[0], 683.5, 1e-3) << "the channel's own column stays";
}

// 30 degC at zero by the rack's own word, where the thermometer showed 20: 50 shown are 60, P(60) - P(30) =
// -45.
TEST(DerivedChannels, ZeroTemperatureIsTheRacksWhenItIsGiven) {
  Bench bench(rackText(kPacket, "temperature = \"F1\"\nzero_temperature = \"30 degC\"", ""));
  EXPECT_NEAR(bench.show(100 - 49.5, 0, 0, 50)[4], 100, 1e-3);
}

TEST(DerivedChannels, TheFactorsSlopeIsTakenOut) {
  Bench bench(rackText("factor_slope = \"1 %/100K\"", "temperature = \"F1\"", ""));
  EXPECT_NEAR(bench.show(1003.6, 0, 0, 60)[4], 1000, 1e-3);
}

// The second gauge of a half bridge cancels the thermal output already; the factor's slope stays.
TEST(DerivedChannels, AHalfBridgeGetsNoSecondThermalCorrection) {
  Bench bench(
      rackText(kPacket + "\nfactor_slope = \"1 %/100K\"", "temperature = \"F1\"", "", "half bending"));
  EXPECT_NEAR(bench.show(1003.6, 0, 0, 60)[4], 1000, 1e-3);
  Bench none(rackText(kPacket, "temperature = \"F1\"", "", "half bending"));
  EXPECT_TRUE(none.derived.columns(0).empty());
}

// Uniaxial steel: shown = e (1 - 0.3 Kt) / (1 - 0.285 Kt), Kt = 5 %.
TEST(DerivedChannels, AKnownFieldTakesTheTransversePartOut) {
  Bench bench(rackText("transverse_sensitivity = \"5 %\"", "field_ratio = -0.3", ""));
  ASSERT_EQ(bench.names(), Names{"S01.mechanical microstrain"});
  EXPECT_NEAR(bench.show(1000 * (1 - 0.015) / (1 - 0.01425), 0, 0, 20)[4], 1000, 1e-3);
}

TEST(DerivedChannels, AThermometerThatIsSilentOrFlaggedIsNotBelieved) {
  Bench bench(rackText(kPacket, "temperature = \"F1\"", ""));
  EXPECT_TRUE(std::isnan(bench.show(500, 0, 0, 50, 0s, {0, device::kMissing, 0, 0})[4])) << "none yet";
  EXPECT_EQ(bench.widened.flagsAt(0, 4), device::kMissing) << "what is missing says so";
  EXPECT_NEAR(bench.show(500, 0, 0, 20, 1s)[4], 500, 1e-3);
  EXPECT_EQ(bench.widened.flagsAt(0, 4), 0);
  EXPECT_NEAR(bench.show(500, 0, 0, 90, 30s, {0, device::kSaturated, 0, 0})[4], 500, 1e-3)
      << "the latest good one counts";
  EXPECT_TRUE(std::isnan(bench.show(500, 0, 0, 90, 62s, {0, device::kSaturated, 0, 0})[4])) << "for a minute";
}

const std::string kRosette = R"(
[[rosette]]
name = "R1"
layout = "rectangular"
channels = ["S01", "S03", "S04"]
modulus = "70 GPa"
poisson = 0.33
)";

// Philpot, Mechanics of Materials (MecMovies), M13.6: verified to the digits printed; stresses computed.
TEST(DerivedChannels, ARosetteGivesThePublishedPrincipalStrains) {
  Bench bench(rackText("", "", kRosette));
  EXPECT_EQ(bench.names(),
            (Names{"R1.major microstrain", "R1.minor microstrain", "R1.angle deg", "R1.shear microstrain",
                   "R1.major_stress MPa", "R1.minor_stress MPa", "R1.equivalent_stress MPa"}));
  const auto row = bench.show(770, 1180, -350, 20);
  EXPECT_NEAR(row[4], 1330.04, 6e-3);
  EXPECT_NEAR(row[5], -910.04, 6e-3);
  EXPECT_NEAR(row[6], 30.0007, 1e-3);
  EXPECT_NEAR(row[7], 2240.09, 1e-2);
  EXPECT_NEAR(row[8], 80.890, 1e-3);
  EXPECT_NEAR(row[9], -37.009, 1e-3);
}

TEST(DerivedChannels, ARosetteStandsOnMechanicalStrainAndItsTransverseSensitivity) {
  // 772.880252, 1188.86291, -363.462605 from 770, 1180, -350 at Kt = 2 % (computed); the first one is warm.
  Bench bench(rackText(kPacket + "\ntransverse_sensitivity = \"2 %\"", "temperature = \"F1\"", kRosette));
  Bench cold(rackText("", "", kRosette));
  const auto row = bench.show(770 - 16.5, 1180, -350, 50);
  const auto want = cold.show(772.880252, 1188.86291, -363.462605, 20);
  for (std::size_t k = 0; k < 7; ++k) EXPECT_NEAR(row[5 + k], want[4 + k], 2e-3) << k;
}

TEST(DerivedChannels, NoAngleInEqualBiaxialStrain) {
  Bench bench(rackText("", "", kRosette));
  const auto row = bench.show(200.1, 200, 199.9, 20);
  EXPECT_NEAR(row[4], 200, 0.2);
  EXPECT_TRUE(std::isnan(row[6]));
}

TEST(DerivedChannels, FlagsOfEveryGaugeArePassedOnAndTheRatioIsNone) {
  Bench bench(rackText("", "", kRosette));
  bench.show(1, 2, 3, 20, 0s, {device::kSwitching, 0, device::kSaturated, 0});
  ASSERT_EQ(bench.widened.inputs, 11u);
  EXPECT_EQ(bench.widened.flagsAt(0, 4), device::kSwitching | device::kSaturated);
  EXPECT_TRUE(std::isnan(bench.widened.at(0, 4)));
  EXPECT_NEAR(bench.widened.at(0, 0), 0.5e-6, 1e-12);
}

TEST(DerivedChannels, APairGivesAxialAndBending) {
  Bench bench(rackText("", "", "\n[[pair]]\nname = \"P\"\nchannels = [\"S01\", \"S04\"]\n"));
  ASSERT_EQ(bench.names(), (Names{"P.axial microstrain", "P.bending microstrain"}));
  const auto row = bench.show(420, 9, -180, 20);
  EXPECT_NEAR(row[4], 120, 1e-3);
  EXPECT_NEAR(row[5], 300, 1e-3);
}

TEST(DerivedChannels, AThermometerThatNobodyCalibratedIsMissed) {
  Bench bench(rackText(kPacket, "temperature = \"F1\"", ""));
  std::erase_if(bench.record.channels, [](const auto& c) { return c.name == "F1"; });
  const auto made = DerivedChannels::of(bench.rack, bench.record, bench.corrections);
  ASSERT_FALSE(made);
  EXPECT_EQ(made.error().code, ErrorCode::not_found);
}

}  // namespace
}  // namespace shuntwright::correction
