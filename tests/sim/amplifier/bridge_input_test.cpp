// Noise, mains pickup, filter, span and offset of a simulated input, each told from its samples.
#include "sim/amplifier/bridge_input.h"

#include <gtest/gtest.h>

#include <cmath>
#include <memory>
#include <numbers>
#include <tuple>
#include <vector>

namespace shuntwright::sim {
namespace {

using namespace units;
using namespace std::chrono_literals;
using description::CircuitKind;
using description::Terminal;

/// One quarter bridge with a shunt across its gauge, on an amplifier with a filter of 20 ms.
class BridgeInputTest : public ::testing::Test {
 protected:
  BridgeInputTest() {
    auto profile = std::make_shared<description::Profile>();
    profile->inputs.emplace();
    profile->inputs->count = 1;
    profile->inputs->halfBridge = {1.0 * kiloohm, 0.02 * percent};
    profile->inputs->filterTimeConstant = 20ms;
    rack_.devices.resize(1);
    rack_.devices[0].name = "amp";
    rack_.devices[0].profile = profile;
    rack_.gauges["G"].factor = GaugeFactor(2.0);
    rack_.gauges["G"].resistance = {350.0 * ohm, 0.3 * percent};
    rack_.resistors["RC"].value = 174.65 * kiloohm;
    description::Channel channel;
    channel.name = "C";
    channel.device = "amp";
    channel.gauge = "G";
    channel.circuit = CircuitKind::quarter_3_wire;
    channel.expected = 1000.0 * microstrain;
    for (const auto t : description::leadsOf(channel.circuit, false)) channel.leads[t].resistance = 2.0 * ohm;
    description::Shunt shunt;
    shunt.resistor = "RC";
    shunt.across = {Terminal::exc_plus, Terminal::comp};
    channel.shunts = {shunt};
    rack_.channels = {channel};
    clock_.start = VirtualClock::kDefaultStart;
    scenario_.imperfections.noise = scenario_.imperfections.mains = scenario_.imperfections.drift = Ratio();
    scenario_.imperfections.leadsWarm = false;
  }

  std::unique_ptr<BridgeInput> input(const ChannelFaults& faults = {}, std::uint64_t seed = 5) {
    specimen_ = std::make_unique<Specimen>(rack_, scenario_, Random(seed).fork(1));
    TrueChannel truth(rack_, rack_.channels[0], scenario_.imperfections, faults, Random(seed).fork(2));
    return std::make_unique<BridgeInput>(std::move(truth), *specimen_, clock_,
                                         *rack_.devices[0].profile->inputs, scenario_.imperfections, faults,
                                         Random(seed).fork(3));
  }

  static void switchShunt(BridgeInput& input, Instant when, bool closed) {
    input.touch(when);
    input.channel().shunts()[0].closed = closed;
    input.contactChanged(when, closed);
  }

  /// n samples, one every `step`.
  std::vector<double> take(BridgeInput& input, int n, Nanoseconds step, Instant from) {
    std::vector<double> values;
    for (int k = 0; k < n; ++k) values.push_back(input.sample(from + k * step));
    return values;
  }

  description::Rack rack_;
  Scenario scenario_;
  LoadClock clock_;
  std::unique_ptr<Specimen> specimen_;
};

double mean(const std::vector<double>& values) {
  double sum = 0;
  for (const double v : values) sum += v;
  return sum / static_cast<double>(values.size());
}

double deviation(const std::vector<double>& values) {
  const double m = mean(values);
  double sum = 0;
  for (const double v : values) sum += (v - m) * (v - m);
  return std::sqrt(sum / static_cast<double>(values.size() - 1));
}

// 20 000 draws: the standard deviation is known to 1 part in 200 (1/sqrt(2n)), four of these are allowed; one
// sample is as good as independent of the next (lag-1 correlation within 4/sqrt(n)).
TEST_F(BridgeInputTest, noiseIsWhiteAndAsLargeAsStated) {
  scenario_.imperfections.noise = 0.5 * microvolt_per_volt;
  auto one = input();
  const auto values = take(*one, 20000, 10ms, clock_.start);
  EXPECT_NEAR(deviation(values) / 0.5e-6, 1, 0.02);
  const double m = mean(values);
  double lag = 0;
  for (std::size_t k = 1; k < values.size(); ++k) lag += (values[k] - m) * (values[k - 1] - m);
  EXPECT_NEAR(lag / (20000 * 0.25e-12), 0, 4 / std::sqrt(20000.0));

  ChannelFaults noisy;
  noisy.noiseScale = 20;
  auto other = input(noisy);
  EXPECT_NEAR(deviation(take(*other, 20000, 10ms, clock_.start)) / 10e-6, 1, 0.02);
}

TEST_F(BridgeInputTest, aHeatedGaugeCreepsToItsApparentStrainAndTheTruthDoesNot) {
  scenario_.imperfections.selfHeating = 10.0 * microstrain;
  specimen_ = std::make_unique<Specimen>(rack_, scenario_, Random(5).fork(1));
  TrueChannel truth(rack_, rack_.channels[0], scenario_.imperfections, {}, Random(5).fork(2));
  BridgeInput warm(std::move(truth), *specimen_, clock_, *rack_.devices[0].profile->inputs,
                   scenario_.imperfections, {}, Random(5).fork(3), 2.0);
  // 2 kW/m2 give 20 microstrain, 63 % of them after the time constant of 30 s.
  const double K = warm.channel().gaugeFactor();
  const auto apparent = [&](Nanoseconds after) {
    return 4e6 / K * (warm.trueRatioAt(clock_.start + after) - warm.trueRatioAt(clock_.start));
  };
  EXPECT_NEAR(apparent(30s), 20 * (1 - std::exp(-1)), 0.5);
  EXPECT_NEAR(apparent(600s), 20, 0.5);
  EXPECT_EQ(warm.strainAt(clock_.start + 600s), 0);
}

TEST_F(BridgeInputTest, flickerAddsToTheWhiteNoise) {
  scenario_.imperfections.flicker = 1.0 * microvolt_per_volt;
  auto one = input();
  const auto values = take(*one, 20000, 10ms, clock_.start);
  // Every time constant from 20 ms to 1000 s, a factor of four apart: eight parts; over 200 s the slowest
  // hardly move.
  const double least = std::sqrt(5 * std::log10(4.0)), most = std::sqrt(8 * std::log10(4.0));
  EXPECT_GT(deviation(values), 0.7e-6 * least);
  EXPECT_LT(deviation(values), 1.4e-6 * most);
}

TEST_F(BridgeInputTest, mainsPickupIsASineOf50Hz) {
  scenario_.imperfections.mains = 2.0 * microvolt_per_volt;
  auto one = input();
  const auto values = take(*one, 1000, 1ms, clock_.start);
  // One bin of a Fourier sum over whole periods: all of the signal's swing is at 50 Hz.
  const auto amplitude = [&](double frequency_Hz) {
    double c = 0, s = 0;
    for (std::size_t k = 0; k < values.size(); ++k) {
      const double angle = 2 * std::numbers::pi * frequency_Hz * 1e-3 * static_cast<double>(k);
      c += values[k] * std::cos(angle);
      s += values[k] * std::sin(angle);
    }
    return 2 * std::hypot(c, s) / static_cast<double>(values.size());
  };
  EXPECT_NEAR(amplitude(50), 2e-6, 1e-11);
  EXPECT_NEAR(amplitude(60), 0, 1e-11);
  EXPECT_NEAR(amplitude(100), 0, 1e-11);
}

// First order: what is left of a step after t is exp(-t/tau), with tau near the profile's 20 ms.
TEST_F(BridgeInputTest, aStepSettlesExponentially) {
  auto one = input();
  const double before = one->sample(clock_.start + 1s);
  const Instant closed = clock_.start + 2s;
  switchShunt(*one, closed, true);
  const double early = one->sample(closed + 10ms), later = one->sample(closed + 30ms);
  const double after = one->sample(closed + 5s);
  EXPECT_GT(after, before) << "a shunt across the completion resistor reads as tension";
  const double tau_s = 0.020 / std::log((after - early) / (after - later));
  EXPECT_GE(tau_s, 0.9 * 0.020);
  EXPECT_LE(tau_s, 1.05 * 0.020);
  EXPECT_NEAR((after - early) / (after - before), std::exp(-0.010 / tau_s), 1e-9);
}

TEST_F(BridgeInputTest, spanAndOffsetStandBetweenRatioAndReading) {
  auto one = input();
  const double open = one->trueRatioAt(clock_.start), shown = one->sample(clock_.start);
  switchShunt(*one, clock_.start + 1s, true);
  const double shunted = one->trueRatioAt(clock_.start + 10s), shownShunted = one->sample(clock_.start + 10s);
  EXPECT_NEAR((shownShunted - shown) / (shunted - open), one->span(), 1e-9);
  EXPECT_NEAR(one->span(), 1, 5e-3);
  EXPECT_LE(std::abs(shown - one->span() * open), 10e-6);
  EXPECT_NE(shown, one->span() * open);
}

TEST_F(BridgeInputTest, theOffsetWandersByNoMoreThanStated) {
  scenario_.imperfections.drift = 0.3 * microvolt_per_volt;
  auto one = input();
  const auto values = take(*one, 7200, 1s, clock_.start);
  const auto [low, high] = std::minmax_element(values.begin(), values.end());
  EXPECT_LE(*high - *low, 0.6e-6 * 1.0001);
  EXPECT_GE(*high - *low, 0.5e-6) << "a whole wander fits in two hours";
  for (std::size_t k = 1; k < values.size(); ++k)
    EXPECT_LT(std::abs(values[k] - values[k - 1]), 0.01e-6) << "slowly";
}

TEST_F(BridgeInputTest, theLoadIsFollowed) {
  auto one = input();
  const double idle = one->sample(clock_.start + 5s);
  clock_.loadStart = clock_.start + 10s;
  take(*one, 3500, 10ms, clock_.start + 5s);
  // In the first hold (4 s of ramp, 6 s of hold, 20 % of the load).
  const Instant held = clock_.loadStart + 9s;
  EXPECT_GT(one->strainAt(held), 0.15e-3);
  auto fresh = input();
  const auto inHold = take(*fresh, 100, 10ms, held - 1s);
  EXPECT_NEAR(inHold.back() - idle,
              fresh->span() * (fresh->trueRatioAt(held) - fresh->trueRatioAt(clock_.start)), 1e-9);
}

TEST_F(BridgeInputTest, aBentAmplifierReadsMoreTheMoreThereIs) {
  const auto closedReading = [&](const ChannelFaults& faults) {
    auto one = input(faults);
    take(*one, 1, 10ms, clock_.start + 1s);
    switchShunt(*one, clock_.start + 2s, true);
    const double reading = take(*one, 200, 10ms, clock_.start + 2s).back();
    return std::tuple(reading, one->trueRatioAt(clock_.start + 4s), one->span());
  };
  ChannelFaults faults;
  faults.bend = 0.01;
  const auto [straight, ratio, span] = closedReading({});
  const auto [bent, sameRatio, sameSpan] = closedReading(faults);
  ASSERT_EQ(span, sameSpan);
  ASSERT_EQ(ratio, sameRatio);
  // 1 % more for each mV/V.
  EXPECT_NEAR(bent - straight, span * 0.01 * 1e3 * ratio * ratio, 1e-12);
  EXPECT_GT(std::abs(ratio), 1e-4);
}

TEST_F(BridgeInputTest, strainLeftBehindByAClosing) {
  ChannelFaults faults;
  faults.noReturn = 30.0 * microstrain;
  auto one = input(faults);
  for (int k = 0; k < 2; ++k) {
    switchShunt(*one, clock_.start + (1 + k) * 10s, true);
    switchShunt(*one, clock_.start + (1 + k) * 10s + 5s, false);
  }
  EXPECT_NEAR(one->strainAt(clock_.start + 60s), 60e-6, 1e-12);
}

}  // namespace
}  // namespace shuntwright::sim
