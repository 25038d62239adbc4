#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "driver/description/rack.h"
#include "tests/driver/description/sample.h"

namespace {

using namespace shuntwright;
using namespace shuntwright::description;
using testing::HasSubstr;

std::optional<Rack> read(const std::string& keys, Diagnostics& d) {
  const std::string old = "[resistor.RC]\nvalue = \"174.65 kohm\"\ntolerance = \"0.1 %\"";
  const auto text = sample::spoilt(sample::kRack, old, old + '\n' + keys);
  return loadRack("b/rack.toml", sample::reader({{"b/rack.toml", text}, {"p/device.toml", sample::kProfile}}),
                  d);
}

std::string mistakeIn(const std::string& keys) {
  Diagnostics d;
  EXPECT_FALSE(read(keys, d));
  return d.render(false);
}

// R = R_c (1 + a (T - T_c)): 25 ppm/K over 12 K is 300 ppm.
TEST(ResistorOfARack, isCarriedOverToTheTemperatureInTheRack) {
  Diagnostics d;
  const auto rack = read(
      "certificate_temperature = \"23 degC\"\ntemperature = \"35 degC\"\ntemperature_coefficient = \"25 "
      "ppm/K\"\n"
      "certificate = \"2026-0117\"\ndue = \"2027-02-28\"",
      d);
  ASSERT_TRUE(rack) << d.render(false);
  const Resistor& resistor = rack->resistors.at("RC");
  EXPECT_NEAR(resistor.value.in(units::ohm), 174650.0 * 1.0003, 1e-7);
  EXPECT_EQ(resistor.certificate, "2026-0117");
  using namespace std::chrono_literals;
  EXPECT_EQ(resistor.due, 2027y / 2 / 28);
}

TEST(ResistorOfARack, needsBothTemperaturesAndTheCoefficient) {
  EXPECT_THAT(mistakeIn("temperature = \"35 degC\"\ntemperature_coefficient = \"25 ppm/K\""),
              HasSubstr("has temperatures, but no \"certificate_temperature\""));
  EXPECT_THAT(mistakeIn("certificate_temperature = \"23 degC\"\ntemperature_coefficient = \"25 ppm/K\""),
              HasSubstr("has temperatures, but no \"temperature\""));
  EXPECT_THAT(mistakeIn("certificate_temperature = \"23 degC\"\ntemperature = \"35 degC\""),
              HasSubstr("has temperatures, but no \"temperature_coefficient\""));
}

TEST(ResistorOfARack, dueIsADateOfTheCalendar) {
  for (const char* wrong : {"2027-02-29", "27-02-28", "2027/02/28", "2027-2-28", "2027-02-28T00", "soon"}) {
    EXPECT_THAT(mistakeIn("due = \"" + std::string(wrong) + "\""),
                HasSubstr("\"due\" is no date: \"" + std::string(wrong) + '"'));
  }
  EXPECT_THAT(mistakeIn("due = 2027-02-28"), HasSubstr("in double quotes"));
}

}  // namespace
