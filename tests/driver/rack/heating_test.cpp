#include "driver/rack/heating.h"

#include <gtest/gtest.h>

#include "tests/support/virtual_bench.h"

namespace shuntwright::rack {
namespace {

using namespace units;

description::Rack benchWith(double excitation_V, double resistance_ohm, const char* specimen, double grid_mm2) {
  auto rack = test::shippedRack("small_bench.toml");
  for (auto& channel : rack.channels) {
    channel.excitation = excitation_V * volt;
    channel.measuredResistance.reset();
  }
  for (auto& [name, sheet] : rack.gauges) {
    sheet.resistance.value = resistance_ohm * ohm;
    sheet.specimen = specimen;
    sheet.gridArea = grid_mm2 * square_millimetre;
  }
  return rack;
}

const description::Channel& aGauge(const description::Rack& rack) {
  for (const auto& channel : rack.channels) {
    if (!channel.transducer) return channel;
  }
  return rack.channels.front();
}

// P = E^2 / (4 R): 350 ohm at 5 V 17.9 mW, 120 ohm at 5 V 52 mW (textbook figures, from memory; computed).
TEST(GaugeHeating, powerOfTheUsualGauges) {
  const auto high = benchWith(5, 350, "steel", 18);
  EXPECT_NEAR(1e3 * heatingOf(high, aGauge(high))->power_W, 17.9, 0.05);
  const auto low = benchWith(5, 120, "steel", 9);
  EXPECT_NEAR(1e3 * heatingOf(low, aGauge(low))->power_W, 52, 0.1);
  EXPECT_NEAR(*heatingOf(low, aGauge(low))->density_W_per_m2, 52.083e-3 / 9e-6, 1);
}

TEST(GaugeHeating, limitsFollowTheMaterialAndItsThickness) {
  EXPECT_EQ(densityLimit_W_per_m2("structural steel, 20 mm"), 8000);
  EXPECT_EQ(densityLimit_W_per_m2("Thin steel sheet"), 3000);
  EXPECT_EQ(densityLimit_W_per_m2("aluminium block"), 16000);
  EXPECT_EQ(densityLimit_W_per_m2("carbon fibre skin on steel"), 800);
  EXPECT_EQ(densityLimit_W_per_m2("plastic"), 80);
  EXPECT_FALSE(densityLimit_W_per_m2("").has_value());
  EXPECT_FALSE(densityLimit_W_per_m2("moon rock").has_value());
}

TEST(GaugeHeating, tooMuchIsAWarningThatNamesTheExcitationThatWouldDo) {
  description::Diagnostics fine, hot;
  warnOfHeating(benchWith(2.5, 350, "steel", 18), fine);
  EXPECT_TRUE(fine.problems().empty());
  const auto rack = benchWith(10, 120, "glass fibre", 9);
  warnOfHeating(rack, hot);
  ASSERT_FALSE(hot.problems().empty());
  EXPECT_TRUE(hot.ok()) << "a warning is no error";
  const auto& first = hot.problems().front();
  EXPECT_EQ(first.place.line, aGauge(rack).place.line);
  EXPECT_NE(first.message.find("23 kW/m2"), std::string::npos) << first.message;
  EXPECT_NE(first.remedy.find("V"), std::string::npos);
}

TEST(GaugeHeating, nothingIsSaidOfWhatIsNotKnown) {
  auto rack = benchWith(10, 120, "glass fibre", 9);
  for (auto& [name, sheet] : rack.gauges) sheet.gridArea.reset();
  description::Diagnostics silent;
  warnOfHeating(rack, silent);
  EXPECT_TRUE(silent.problems().empty());
}

}  // namespace
}  // namespace shuntwright::rack
