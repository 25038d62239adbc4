// The zero taken again before the load, against the simulator's own strain.
#include "driver/calibration/zero.h"

#include <gtest/gtest.h>

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <algorithm>
#include <cmath>

#include "tests/support/virtual_bench.h"

namespace shuntwright {
namespace {

using namespace std::chrono_literals;
using calibration::Zeros;
using test::shippedRack;
using test::VirtualBench;

Zeros takenOn(VirtualBench& world, Nanoseconds span = 2s) {
  Zeros zeros;
  auto done = world.onRack([&](rack::LiveRack& live) -> Task<Result<void>> {
    const auto permit = VirtualBench::permit(live.described());
    auto taken = co_await calibration::takeZeros(live, permit, span);
    if (!taken) co_return std::unexpected(std::move(taken.error()));
    zeros = std::move(*taken);
    co_return Result<void>{};
  });
  EXPECT_TRUE(done.has_value()) << done.error().text();
  return zeros;
}

void pass(VirtualBench& world, Nanoseconds time) {
  auto waited = world.onRack([&](rack::LiveRack& live) -> Task<Result<void>> {
    co_await waitFor(live.clock(), time);
    co_return Result<void>{};
  });
  ASSERT_TRUE(waited.has_value());
}

double microstrainOf(const calibration::ChannelResult& result, units::Ratio reading) {
  return 1e6 * result.correction.strainAt(reading.in(units::volt_per_volt));
}

class ZeroAnew : public testing::Test {
 protected:
  // An offset that wanders by 20 microvolt/volt is about 40 microstrain: nobody would leave that in a test.
  static sim::Scenario wandering() {
    sim::Scenario scenario;
    scenario.imperfections.drift = 20e-3 * units::millivolt_per_volt;
    return scenario;
  }
  ZeroAnew() : world(shippedRack("small_bench.toml"), wandering()) {
    auto done = world.calibrate();
    EXPECT_TRUE(done.has_value()) << done.error().text();
    record = std::move(*done);
  }
  const description::Channel& described(const std::string& name) { return *world.rack.channel(name); }
  bool scored(const calibration::ChannelResult& c) {
    return !described(c.name).transducer && !described(c.name).shunts.empty();
  }

  VirtualBench world;
  calibration::Record record;
};

TEST_F(ZeroAnew, whatHasWanderedSinceTheCalibrationIsGone) {
  pass(world, 30min);
  const Zeros zeros = takenOn(world);
  const auto before = record;
  (void)calibration::rezero(record, world.rack, zeros, world.clock.now(), 2min);
  const Zeros again = takenOn(world);
  double worstBefore = 0, worstAfter = 0;
  for (std::size_t k = 0; k < record.channels.size(); ++k) {
    if (!scored(record.channels[k])) continue;
    const auto reading = again.at(record.channels[k].name).mean;
    worstBefore = std::max(worstBefore, std::abs(microstrainOf(before.channels[k], reading)));
    worstAfter = std::max(worstAfter, std::abs(microstrainOf(record.channels[k], reading)));
    EXPECT_EQ(record.channels[k].spanRatio, before.channels[k].spanRatio) << "the span is not the zero's business";
  }
  EXPECT_GT(worstBefore, 5);
  EXPECT_LT(worstAfter, 0.5);
  ASSERT_TRUE(record.zeroed.has_value());
}

TEST_F(ZeroAnew, aZeroThatHasMovedBeyondTheLimitIsTold) {
  pass(world, 30min);
  auto zeros = takenOn(world);
  // 0.2 mV/V on a quarter bridge of factor 2 is some 400 microstrain.
  const auto first = std::find_if(record.channels.begin(), record.channels.end(), [&](const auto& c) { return scored(c); });
  const std::string name = first->name;
  auto& moved = zeros.at(name);
  moved.mean = moved.mean + 0.2 * units::millivolt_per_volt;
  const auto findings = calibration::rezero(record, world.rack, zeros, world.clock.now(), 2min);
  EXPECT_TRUE(std::any_of(findings.begin(), findings.end(), [&](const auto& f) {
    return f.code == "zero-moved" && f.message.find(name) != std::string::npos;
  }));
}

TEST_F(ZeroAnew, aSaturatedReadingIsNoZeroAndTheOldOneStays) {
  auto zeros = takenOn(world);
  const std::string name = zeros.begin()->first;
  zeros.begin()->second.saturated = 3;
  const auto old = *record.channel(name);
  const auto findings = calibration::rezero(record, world.rack, zeros, world.clock.now(), 2min);
  EXPECT_TRUE(std::any_of(findings.begin(), findings.end(), [&](const auto& f) { return f.code == "zero-not-taken"; }));
  EXPECT_EQ(record.channel(name)->correction.q, old.correction.q);
}

TEST_F(ZeroAnew, theShorterItMustHoldTheLessItMayMove) {
  const auto zeros = takenOn(world);
  auto brief = record, hour = record;
  (void)calibration::rezero(brief, world.rack, zeros, world.clock.now(), 1min);
  (void)calibration::rezero(hour, world.rack, zeros, world.clock.now(), 1h);
  for (std::size_t k = 0; k < record.channels.size(); ++k) {
    if (!scored(record.channels[k])) continue;
    EXPECT_GT(brief.channels[k].zeroExpandedUncertainty.in(units::strain), 0);
    EXPECT_LT(brief.channels[k].zeroExpandedUncertainty, hour.channels[k].zeroExpandedUncertainty)
        << record.channels[k].name;
  }
}

TEST_F(ZeroAnew, noZeroWhileARelayMayBeClosed) {
  auto done = world.onRack([&](rack::LiveRack& live) -> Task<Result<void>> {
    const auto permit = VirtualBench::permit(world.rack);
    const auto relay = world.rack.channels[0].shunts[0].relay;
    if (auto closed = co_await live.relays().close(permit, relay); !closed) co_return closed;
    auto taken = co_await calibration::takeZeros(live, permit, 1s);
    EXPECT_EQ(taken.has_value() ? ErrorCode::io : taken.error().code, ErrorCode::refused);
    co_return co_await live.relays().open(relay);
  });
  ASSERT_TRUE(done.has_value()) << done.error().text();
}

}  // namespace
}  // namespace shuntwright
