// proves P-03
#include <gtest/gtest.h>

#include "driver/description/rack.h"
#include "tests/driver/description/sample.h"

// Rosettes, pairs, and what gauges and channels say of temperature and transverse strain.
namespace {

using namespace shuntwright;
using namespace shuntwright::description;
using Lines = std::vector<std::string>;

/// The sample with a full packet, a thermometer and three gauges on one spot.
std::string rackText() {
  std::string text = sample::spoilt(sample::kRack, "resistance = \"350 ohm\"\n", R"(resistance = "350 ohm"
thermal_output = { coefficients = [-31.8, 2.77, -0.0655, 3.28e-4], factor = 2.0 }
factor_slope = "1.2 %/100K"
factor_temperature = "23 degC"
transverse_sensitivity = "0.4 %"
)");
  text = sample::spoilt(text, "rated_value = 50, unit = \"kN\"", "rated_value = 100, unit = \"degC\"");
  text = sample::spoilt(text, "excitation = \"5 V\"\n",
                        "temperature = \"F1\"\nzero_temperature = \"19 degC\"\n");
  for (const std::string input : {"3", "4"}) {
    text += "\n[[channel]]\nname = \"S0" + input + "\"\ndevice = \"amp1\"\ninput = " + input +
            "\ncircuit = \"quarter 3-wire\"\ngauge = \"G350\"\nleads = { each = \"1 ohm\" }\n";
  }
  return text + R"(
[[rosette]]
name = "R1"
layout = "rectangular"
channels = ["S01", "S03", "S04"]
modulus = "70 GPa"
poisson = 0.33

[[pair]]
name = "P1"
channels = ["S03", "S04"]
first_part = 0.4
)";
}

TEST(Spots, AreReadInFull) {
  Diagnostics d;
  const auto rack = loadRack(
      "b/rack.toml", sample::reader({{"b/rack.toml", rackText()}, {"p/device.toml", sample::kProfile}}), d);
  ASSERT_TRUE(rack && d.problems().empty()) << d.render(false);
  const GaugeSheet& gauge = rack->gauges.at("G350");
  ASSERT_TRUE(gauge.thermalOutput);
  EXPECT_EQ(gauge.thermalOutput->coefficients_microstrain,
            (std::vector<double>{-31.8, 2.77, -0.0655, 3.28e-4}));
  EXPECT_EQ(gauge.thermalOutput->factor.value(), 2.0);
  EXPECT_NEAR(gauge.factorSlope.in(units::per_kelvin), 1.2e-4, 1e-18);
  EXPECT_EQ(gauge.factorTemperature.celsius(), 23);
  EXPECT_NEAR(gauge.transverseSensitivity->in(units::one), 0.004, 1e-18);
  EXPECT_EQ(gauge.transversePoisson, 0.285);
  EXPECT_EQ(rack->channel("S01")->temperature, "F1");
  EXPECT_EQ(rack->channel("S01")->zeroTemperature, units::Temperature::celsius(19));
  ASSERT_EQ(rack->rosettes.size(), 1u);
  EXPECT_EQ(rack->rosettes[0].layout, RosetteLayout::rectangular);
  EXPECT_EQ(rack->rosettes[0].channels, (std::vector<std::string>{"S01", "S03", "S04"}));
  EXPECT_EQ(rack->rosettes[0].modulus, 70.0 * units::gigapascal);
  EXPECT_EQ(rack->rosettes[0].poisson, 0.33);
  ASSERT_EQ(rack->pairs.size(), 1u);
  EXPECT_EQ(rack->pairs[0].firstPart, 0.4);
}

struct Spoilt {
  const char* from;
  const char* to;
  const char* said;  ///< in the one problem that comes of it
};

TEST(Spots, EachMistakeIsReportedWithItsRemedy) {
  const Spoilt cases[] = {
      {"layout = \"rectangular\"", "layout = \"square\"", "\"layout\""},
      {"layout = \"rectangular\"\n", "", "\"layout\""},
      {"[\"S01\", \"S03\", \"S04\"]", "[\"S01\", \"S03\"]", "names 2 channels and has 3 gauges"},
      {"[\"S01\", \"S03\", \"S04\"]", "[\"S01\", \"S03\", \"S05\"]", "no channel is called \"S05\""},
      {"[\"S01\", \"S03\", \"S04\"]", "[\"S01\", \"S03\", \"F1\"]", "\"F1\" is a transducer circuit"},
      {"[\"S01\", \"S03\", \"S04\"]", "[\"S01\", \"S03\", \"S03\"]", "named twice"},
      {"name = \"R1\"", "name = \"S01\"", "the name \"S01\" is taken"},
      {"name = \"P1\"", "name = \"R1\"", "the name \"R1\" is taken"},
      {"modulus = \"70 GPa\"\n", "", "modulus"},
      {"poisson = 0.33", "poisson = 0.6", "poisson"},
      {"first_part = 0.4", "first_part = 1.4", "first_part"},
      {"temperature = \"F1\"\n", "", "no \"temperature\""},
      {"temperature = \"F1\"", "temperature = \"F2\"", "no channel is called \"F2\""},
      {"temperature = \"F1\"", "temperature = \"S03\"", "\"S03\" shows no temperature"},
      {"temperature = \"F1\"", "temperature = \"F1\"\nfield_ratio = -0.3", "part of rosette \"R1\""},
      {"[-31.8, 2.77, -0.0655, 3.28e-4]", "[]", "one to eight coefficients"},
      {", factor = 2.0 }", " }", "factor"},
      {"\"1.2 %/100K\"", "\"1.2 %\"", "unknown unit"},
      {"\"0.4 %\"", "\"40 %\"", "transverse_sensitivity"},
  };
  for (const auto& c : cases) {
    const auto said = sample::rackProblems(sample::spoilt(rackText(), c.from, c.to));
    ASSERT_EQ(said.size(), 1u) << c.from << " -> " << c.to << '\n' << testing::PrintToString(said);
    EXPECT_NE(said[0].find(c.said), std::string::npos) << said[0];
    EXPECT_NE(said[0].find(" | "), std::string::npos) << "no remedy: " << said[0];
    EXPECT_NE(said[0].substr(0, 2), "0:") << "no place: " << said[0];
  }
}

TEST(Spots, ATemperatureThatNothingUsesIsAWarning) {
  auto text = sample::spoilt(rackText(), "factor_slope = \"1.2 %/100K\"\n", "");
  text = sample::spoilt(
      text, "thermal_output = { coefficients = [-31.8, 2.77, -0.0655, 3.28e-4], factor = 2.0 }\n", "");
  const auto said = sample::rackProblems(text);
  ASSERT_EQ(said.size(), 1u) << testing::PrintToString(said);
  EXPECT_NE(said[0].find("has no effect"), std::string::npos) << said[0];
}

}  // namespace
