#include "driver/correction/kernel.h"

#include <gtest/gtest.h>

#include <cmath>
#include <cstdlib>
#include <new>
#include <vector>

#include "driver/core/random.h"

namespace {
// Counted so that a test can say "no allocation".
std::size_t allocations = 0;
}  // namespace

void* operator new(std::size_t size) {
  ++allocations;
  if (void* got = std::malloc(size)) return got;
  throw std::bad_alloc();
}
void operator delete(void* what) noexcept { std::free(what); }
void operator delete(void* what, std::size_t) noexcept { std::free(what); }

namespace shuntwright::correction {
namespace {

std::vector<Coefficients> someColumns(std::size_t count) {
  Random random(7);
  std::vector<Coefficients> columns(count);
  for (auto& k : columns) {
    // A quarter bridge, K = 2: p = 2e6 microstrain per V/V, w = -2.
    k = {static_cast<float>(random.uniform(1.9e6, 2.1e6)), static_cast<float>(random.uniform(-2e-3, 2e-3)), -2.0f};
  }
  return columns;
}

// Four single-precision operations round by at most 6e-8 of the value each; the values reach 12 500 microstrain.
TEST(Kernel, agreesWithDoublePrecisionToFourRoundings) {
  for (const std::size_t inputs : {1u, 3u, 16u, 64u, 100u, 257u}) {
    const auto columns = someColumns(inputs);
    const Kernel kernel(columns);
    Random random(inputs);
    const std::size_t frames = 1000;
    std::vector<float> ratio(frames * inputs), out(ratio.size());
    std::vector<double> reference(ratio.size());
    for (auto& r : ratio) r = static_cast<float>(random.uniform(-4e-3, 4e-3));
    kernel.apply(ratio.data(), out.data(), frames);
    applyReference(columns, ratio.data(), reference.data(), frames);
    double worst = 0;
    for (std::size_t k = 0; k < out.size(); ++k) worst = std::max(worst, std::abs(out[k] - reference[k]));
    EXPECT_LT(worst, 4 * 6e-8 * 12500) << inputs << " inputs";
  }
}

// Closed form of the quarter bridge (Ohm's law): e = 4 r / (K (1 - 2 r)); +1000 microstrain at K = 2 reads
// 0.499500499500 mV/V.
TEST(Kernel, givesTheStrainOfAQuarterBridge) {
  const Coefficients column{2e6f, 0, -2.0f};
  const Kernel kernel(std::span(&column, 1));
  const float ratio[] = {0.4995004995e-3f, -0.5005005005e-3f};
  float out[2];
  kernel.apply(ratio, out, 2);
  EXPECT_NEAR(out[0], 1000, 1e-3);
  EXPECT_NEAR(out[1], -1000, 1e-3);
}

// Bent columns next to straight ones; a full bridge in bending with Poisson gauges bends by up to 1e-4 of u.
TEST(Kernel, bendsTheColumnsThatAreBent) {
  auto columns = someColumns(5);
  columns[1].bend = {1e-9f, -2e-12f, 3e-18f, 1e-22f};
  columns[4].bend = {0, -5e-10f, 0, 0};
  const Kernel kernel(columns);
  Random random(3);
  const std::size_t frames = 300;
  std::vector<float> ratio(frames * 5), out(ratio.size());
  std::vector<double> reference(ratio.size());
  for (auto& r : ratio) r = static_cast<float>(random.uniform(-4e-3, 4e-3));
  kernel.apply(ratio.data(), out.data(), frames);
  applyReference(columns, ratio.data(), reference.data(), frames);
  for (std::size_t k = 0; k < out.size(); ++k) EXPECT_NEAR(out[k], reference[k], 6 * 6e-8 * 13000);
  auto straight = columns;
  for (auto& column : straight) column.bend = {};
  std::vector<float> unbent(ratio.size());
  Kernel(straight).apply(ratio.data(), unbent.data(), frames);
  for (std::size_t k = 0; k < out.size(); ++k) {
    if (k % 5 == 1 || k % 5 == 4) continue;
    EXPECT_EQ(out[k], unbent[k]) << "a straight column is not touched by its neighbours";
  }
  EXPECT_GT(std::abs(out[4] - unbent[4]), 1e-3f);
}

TEST(Kernel, missingStaysMissing) {
  const Coefficients column{2e6f, 0, -2.0f};
  const Kernel kernel(std::span(&column, 1));
  const float ratio = NAN;
  float out = 0;
  kernel.apply(&ratio, &out, 1);
  EXPECT_TRUE(std::isnan(out));
}

TEST(Kernel, doesNotAllocate) {
  const auto columns = someColumns(16);
  const Kernel kernel(columns);
  std::vector<float> ratio(16 * 100, 1e-3f), out(ratio.size());
  const auto before = allocations;
  kernel.apply(ratio.data(), out.data(), 100);
  EXPECT_EQ(allocations, before);
}

}  // namespace
}  // namespace shuntwright::correction
