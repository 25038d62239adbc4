// A rosette on a beam that warms up, from the amplifier's lines to the file: principal strains without
// thermal output and transverse sensitivity, against the simulator's own strain.
#include <gtest/gtest.h>
#include <unistd.h>

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <cmath>
#include <filesystem>
#include <map>
#include <numbers>

#include "driver/calibration/zero.h"
#include "driver/recording/reader.h"
#include "sim/physics/specimen.h"
#include "tests/support/virtual_bench.h"
#include "tools/cli/recording_session.h"

namespace shuntwright {
namespace {

using namespace std::chrono_literals;
using namespace units;
using test::VirtualBench;

/// The gantry's rack with a full packet for the gauges of its rosette, and the thermometer named.
description::Rack rackWithRosette() {
  auto rack = test::shippedRack("gantry_beam.toml");
  auto& gauge = rack.gauges.at("G350");
  gauge.thermalOutput = description::ThermalOutput{{-60, 1.5, 0.04}, GaugeFactor(2.0)};
  gauge.factorSlope = 0.012 / 100 * per_kelvin;
  gauge.transverseSensitivity = 3.0 * percent;
  description::Rosette rosette;
  rosette.name = "R1";
  rosette.channels = {"R1-0", "R1-45", "R1-90"};
  for (auto& channel : rack.channels) {
    if (std::ranges::find(rosette.channels, channel.name) != rosette.channels.end())
      channel.temperature = "T1";
    if (channel.name == "T1") channel.transducer->sensitivityTolerance = {};
  }
  rack.rosettes.push_back(std::move(rosette));
  return rack;
}

/// Nobody calibrates the thermometer, and 1 K of it is 5 microstrain here: an amplifier without error of its
/// own keeps the test about the corrections. Shunts, leads and gauges are within their tolerances as ever.
sim::Scenario warmBeam() {
  sim::Scenario s;
  s.imperfections.gaugeFactors = 0;
  s.imperfections.leadsWarm = false;
  s.imperfections.drift = {};
  s.imperfections.offset = {};
  s.imperfections.spanTolerance = 0;
  s.beam.warming = 30.0 * kelvin;
  s.beam.warmingTime = 20min;
  s.places["R1-0"] = {2.7 * metre, 270.0 * millimetre, 0, true};
  s.places["R1-45"] = {2.7 * metre, 270.0 * millimetre, 45, true};
  s.places["R1-90"] = {2.7 * metre, 270.0 * millimetre, 90, true};
  s.levels = {1.0};
  s.ramp = 1s;
  s.hold = 60s;
  return s;
}

TEST(RosetteOnAWarmBeam, PrincipalStrainsAreTheSimulatorsOwn) {
  VirtualBench world(rackWithRosette(), warmBeam());
  const Instant start = world.clock.now();
  auto record = world.calibrate();
  ASSERT_TRUE(record) << record.error().text();
  const auto path =
      std::filesystem::temp_directory_path() / ("rosette-" + std::to_string(::getpid()) + ".h5");
  std::filesystem::remove(path);
  std::map<std::string, std::pair<double, int>> sums;
  Instant loadStart;
  auto rack = world.rack;
  auto done = world.onRack([&](rack::LiveRack& live) -> Task<Result<void>> {
    const auto permit = VirtualBench::permit(world.rack);
    auto ready = co_await live.prepare(permit);
    if (!ready) co_return ready;
    auto zeros = co_await calibration::takeZeros(live, permit, 2s);
    if (!zeros) co_return std::unexpected(std::move(zeros.error()));
    (void)calibration::rezero(*record, world.rack, *zeros, world.clock.now(), 1h);
    // What a good thermometer on the beam would have said meanwhile.
    const sim::Specimen beam(rack, warmBeam(), Random(1));
    for (auto& channel : rack.channels) {
      if (!channel.temperature.empty())
        channel.zeroTemperature = beam.temperature(seconds(world.clock.now() - start));
    }
    co_await waitFor(live.clock(), 1h);
    auto session = cli::RecordingSession::begin(rack, *record, path.string(), world.clock);
    if (!session) co_return std::unexpected(std::move(session.error()));
    loadStart = world.clock.now();
    world.bench->startLoad(loadStart);
    cli::RecordingSession& recording = **session;
    recording.onSample = [&](std::size_t k, Instant when, float, float value, std::uint8_t flags) {
      if (flags != 0 || when < loadStart + 5s || !std::isfinite(value)) return;
      auto& [sum, count] = sums[recording.live()[k].channel];
      sum += static_cast<double>(value);
      ++count;
    };
    const std::function<bool()> stop = [&] { return world.clock.now() > loadStart + 15s; };
    auto recorded = co_await recording.run(live, permit, stop);
    if (!recorded) co_return recorded;
    co_return recording.finish();
  });
  ASSERT_TRUE(done) << done.error().text();
  const auto mean = [&](const std::string& name) { return sums.at(name).first / sums.at(name).second; };

  // The truth, from the beam itself: three strains of it give the tensor, and that its principal values.
  const auto scenario = warmBeam();
  const auto truth = [&](double angle_deg) {
    auto place = scenario.places.at("R1-0");
    place.angle_deg = angle_deg;
    return 1e6 * sim::beamStrain(scenario.beam, place, scenario.maxLoad);
  };
  const double x = truth(0), y = truth(90), shear = 2 * truth(45) - x - y;
  const double centre = (x + y) / 2, radius = std::hypot((x - y) / 2, shear / 2);
  const double angle_deg = 90 / std::numbers::pi * std::atan2(shear, x - y);
  const double largest = centre + radius;

  EXPECT_NEAR(mean("R1.major"), largest, 0.005 * largest);
  EXPECT_NEAR(mean("R1.minor"), centre - radius, 0.005 * largest);
  EXPECT_NEAR(mean("R1.angle"), angle_deg, 0.3);
  EXPECT_NEAR(mean("R1.shear"), 2 * radius, 0.01 * largest);
  const double stress_MPa = 210e3 / (1 - 0.09) * (largest + 0.3 * (centre - radius)) * 1e-6;
  EXPECT_NEAR(mean("R1.major_stress"), stress_MPa, 0.005 * stress_MPa);
  // What it would be without: the thermal output alone is over 100 microstrain here.
  EXPECT_GT(std::abs(mean("R1-0") - x), 80);
  // The gauge alone: its mechanical strain still holds what it feels across its grid.
  EXPECT_NEAR(mean("R1-0.mechanical"), (x + 0.03 * y) / (1 - 0.285 * 0.03), 0.005 * largest);

  // The file has them as further columns.
  {
    auto reader = recording::Reader::open(path.string());
    ASSERT_TRUE(reader) << reader.error().text();
    const auto& device = (*reader)->devices().front();
    const auto column = std::ranges::find(device.channels, "R1.major", &recording::RecordedChannel::name);
    ASSERT_NE(column, device.channels.end());
    EXPECT_EQ(column->unit, "microstrain");
    EXPECT_TRUE(column->calibrated);
    EXPECT_TRUE(std::isnan(column->p));
    const auto rows = (*reader)->read(0, (*reader)->rows(0) - 1, 1);
    ASSERT_TRUE(rows);
    const auto k = static_cast<std::size_t>(column - device.channels.begin());
    EXPECT_NEAR(static_cast<double>(rows->corrected[k]), largest, 0.02 * largest);
    EXPECT_TRUE(std::isnan(rows->ratio[k]));
  }
  std::filesystem::remove(path);
}

}  // namespace
}  // namespace shuntwright
