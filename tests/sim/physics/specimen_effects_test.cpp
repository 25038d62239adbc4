// What gauges make of temperature and of strain across their grid, against the packet's definitions.
#include <gtest/gtest.h>

#include <cmath>

#include "sim/physics/specimen.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright::sim {
namespace {

using namespace units;

class GaugeEffects : public ::testing::Test {
 protected:
  GaugeEffects() {
    scenario.beam.temperature = Temperature::celsius(20);
    scenario.beam.warming = 40.0 * kelvin;
    scenario.beam.warmingTime = std::chrono::seconds(100);
    scenario.places[name()] = {6.0 * metre, 300.0 * millimetre, 0, false};
  }
  std::string name() const { return "Q3"; }
  const description::Channel& channel() const { return *rack.channel(name()); }
  description::GaugeSheet& packet() { return rack.gauges.at(channel().gauge); }
  Specimen specimen() const { return Specimen(rack, scenario, Random(1)); }

  description::Rack rack = test::shippedRack("small_bench.toml");
  Scenario scenario;
};

constexpr double kCold = 0, kWarm = 1e5, kNoLoad = -1, kFullLoad = 4 + 4 * 10 + 5;

TEST_F(GaugeEffects, nothingBesideTheLoadWhenThePacketSaysNothing) {
  const auto s = specimen();
  EXPECT_EQ(s.strainOf(channel(), kFullLoad, kWarm), s.loadStrainOf(channel(), kFullLoad, kWarm));
  EXPECT_GT(s.strainOf(channel(), kFullLoad, kWarm), 100e-6);
}

// Linear heating of an exponential: 63.2 % of the rise after one time constant.
TEST_F(GaugeEffects, theBeamWarms) {
  EXPECT_EQ(specimen().temperature(0).celsius(), 20);
  EXPECT_NEAR(specimen().temperature(100).celsius(), 20 + 40 * (1 - std::exp(-1.0)), 1e-12);
  EXPECT_NEAR(specimen().temperature(kWarm).celsius(), 60, 1e-9);
}

// P(t) = 5 + 2 t - 0.03 t^2: 33 at 20 degC, 17 at 60 degC, read at a factor of 2.
TEST_F(GaugeEffects, thermalOutputIsThePacketsAtTheSheetsFactor) {
  packet().thermalOutput = description::ThermalOutput{{5, 2, -0.03}, GaugeFactor(2.0)};
  const double scale = 2.0 / packet().factor.value();
  EXPECT_NEAR(specimen().strainOf(channel(), kNoLoad, kCold), 33e-6 * scale, 1e-15);
  EXPECT_NEAR(specimen().strainOf(channel(), kNoLoad, kWarm), 17e-6 * scale, 1e-12);
}

TEST_F(GaugeEffects, theFactorGrowsWithTemperature) {
  packet().factorSlope = 0.01 / 100 * per_kelvin;
  const auto s = specimen();
  const double truth = s.loadStrainOf(channel(), kFullLoad, kWarm);
  EXPECT_NEAR(s.strainOf(channel(), kFullLoad, kWarm) / truth, 1 + 1e-4 * (60 - 24), 1e-9);
}

// On the maker's bar (nu = 0.285, uniaxial) the packet's factor is right; on one of nu = 0.35 the gauge shows
// (1 - 0.35 Kt) / (1 - 0.285 Kt).
TEST_F(GaugeEffects, strainAcrossTheGridShows) {
  packet().transverseSensitivity = 2.0 * percent;
  scenario.beam.poisson = 0.285;
  const double truth = specimen().loadStrainOf(channel(), kFullLoad, kCold);
  EXPECT_NEAR(specimen().strainOf(channel(), kFullLoad, kCold) / truth, 1, 1e-12);
  scenario.beam.poisson = 0.35;
  EXPECT_NEAR(specimen().strainOf(channel(), kFullLoad, kCold) / truth,
              (1 - 0.35 * 0.02) / (1 - 0.285 * 0.02), 1e-12);
}

}  // namespace
}  // namespace shuntwright::sim
