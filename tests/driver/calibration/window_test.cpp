#include "driver/calibration/window.h"

#include <gtest/gtest.h>

#include <cmath>
#include <limits>

namespace shuntwright::calibration {
namespace {

using namespace std::chrono_literals;
using units::volt_per_volt;

TEST(WindowBuilder, meanScatterAndDriftOfAStraightLineWithNoise) {
  // y = 1e-3 + 1e-5 t with an alternating +-1e-6: the scatter about the line is known to first order.
  WindowBuilder builder;
  const int n = 100;
  for (int k = 0; k < n; ++k) {
    const double t = 0.01 * k;
    builder.add(Instant{} + k * 10ms, static_cast<float>(1e-3 + 1e-5 * t + (k % 2 == 0 ? 1e-6 : -1e-6)), 0);
  }
  const Window w = builder.window();
  EXPECT_EQ(w.samples, n);
  EXPECT_NEAR(w.mean.in(volt_per_volt), 1e-3 + 1e-5 * 0.495, 1e-10);
  EXPECT_NEAR(w.drift.in(volt_per_volt), 1e-5 * 0.99, 1e-7);
  EXPECT_NEAR(w.deviation.in(volt_per_volt), 1e-6 * std::sqrt(100.0 / 98), 1e-9);
  EXPECT_EQ(w.end - w.start, 990ms);
  EXPECT_TRUE(w.usable());
}

TEST(WindowBuilder, aSmallScatterOnALargeReadingSurvives) {
  // One float step at 1 V/V: the running sums stand on the first sample, so nothing cancels away.
  WindowBuilder builder;
  const float base = 1.0f, next = std::nextafter(base, 2.0f);
  for (int k = 0; k < 1000; ++k) builder.add(Instant{} + k * 1ms, k % 2 == 0 ? base : next, 0);
  const double step = static_cast<double>(next) - 1;
  EXPECT_NEAR(builder.window().deviation.in(volt_per_volt), step / 2, step * 0.01);
}

TEST(WindowBuilder, gapsInsideAWindowAreCountedOnce) {
  WindowBuilder builder;
  device::SampleBlock block;
  block.lostBefore = 3;
  block.damagedBefore = 2;  // of the three
  builder.noteGap(block);
  block.lostBefore = 0;
  builder.noteGap(block);
  EXPECT_EQ(builder.window().lost, 5);
}

TEST(WindowBuilder, saturatedAndMissingSamplesAreCountedAndLeftOut) {
  WindowBuilder builder;
  builder.add(Instant{}, 9.0f, device::kSaturated);
  builder.add(Instant{} + 1s, std::numeric_limits<float>::quiet_NaN(), device::kMissing);
  builder.add(Instant{} + 2s, std::numeric_limits<float>::infinity(), 0);
  builder.add(Instant{} + 3s, 2e-3f, 0);
  builder.add(Instant{} + 4s, 2e-3f, device::kSwitching);
  const Window w = builder.window();
  EXPECT_EQ(builder.seen(), 5);
  EXPECT_EQ(w.samples, 2);
  EXPECT_EQ(w.saturated, 1);
  EXPECT_EQ(w.missing, 2);
  EXPECT_FLOAT_EQ(static_cast<float>(w.mean.in(volt_per_volt)), 2e-3f);
  EXPECT_FALSE(w.usable()) << "one saturated sample is one too many";
}

TEST(WindowBuilder, nothingSeenIsNoReading) {
  const Window w = WindowBuilder().window();
  EXPECT_EQ(w.samples, 0);
  EXPECT_FALSE(w.usable());
  EXPECT_EQ(w.mean.in(volt_per_volt), 0);
}

}  // namespace
}  // namespace shuntwright::calibration
