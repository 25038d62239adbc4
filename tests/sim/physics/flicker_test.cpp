#include "sim/physics/flicker.h"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

namespace shuntwright::sim {
namespace {

/// Allan deviation of means over `m` samples.
double allanDeviation(const std::vector<double>& y, std::size_t m) {
  std::vector<double> means;
  for (std::size_t k = 0; k + m <= y.size(); k += m) {
    double sum = 0;
    for (std::size_t i = 0; i < m; ++i) sum += y[k + i];
    means.push_back(sum / static_cast<double>(m));
  }
  double square = 0;
  for (std::size_t k = 1; k < means.size(); ++k) square += (means[k] - means[k - 1]) * (means[k] - means[k - 1]);
  return std::sqrt(square / (2 * static_cast<double>(means.size() - 1)));
}

// IEEE Std 1139 (from memory): flicker noise of spectral density h/f has an Allan deviation of sqrt(2 ln 2 h) whatever
// the averaging time. A standard deviation s per decade means h = s^2 / ln 10.
TEST(Flicker, itsAllanDeviationIsFlat) {
  const double perDecade = 1e-6;
  Flicker flicker(perDecade, 0.01, 3000, Random(7));
  std::vector<double> y;
  for (int k = 0; k < 200'000; ++k) y.push_back(flicker.after(0.01));
  const double expected = perDecade * std::sqrt(2 * std::log(2) / std::log(10));
  for (const std::size_t m : {20u, 60u, 200u, 600u, 2000u}) {
    EXPECT_NEAR(allanDeviation(y, m) / expected, 1, 0.12) << m << " samples";
  }
}

TEST(Flicker, isThereFromTheStartAndRepeatsFromItsSeed) {
  double square = 0;
  for (std::uint64_t seed = 1; seed <= 400; ++seed) {
    Flicker one(1, 0.1, 100, Random(seed)), two(1, 0.1, 100, Random(seed));
    const double first = one.after(0);
    EXPECT_EQ(first, two.after(0));
    square += first * first;
  }
  // Five parts (0.1, 0.4, 1.6, 6.4, 25.6 s), each of variance log10(4).
  EXPECT_NEAR(square / 400, 5 * std::log10(4.0), 0.6);
}

TEST(Flicker, noneIsNone) {
  Flicker none(0, 0.1, 100, Random(1));
  EXPECT_EQ(none.after(1), 0);
}

}  // namespace
}  // namespace shuntwright::sim
