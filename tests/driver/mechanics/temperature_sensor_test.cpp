#include <gtest/gtest.h>

#include <cmath>

#include "driver/mechanics/platinum.h"
#include "driver/mechanics/thermocouple.h"

namespace shuntwright::mechanics {
namespace {

using namespace units;

Temperature at(double celsius) {
  return Temperature::celsius(celsius);
}

struct Point {
  double celsius, value, tolerance;
};

// IEC 60751, R0 = 100 ohm: printed to 0.01 ohm (verified by quotations of the table), more digits computed.
constexpr Point kPlatinum[] = {
    {-200, 18.52008, 6e-6}, {-100, 60.25584, 6e-6},  {-50, 80.30628, 6e-6}, {0, 100, 1e-12},
    {25, 109.734656, 6e-7}, {50, 119.397125, 6e-7},  {100, 138.5055, 6e-8}, {200, 175.856, 6e-7},
    {400, 247.092, 6e-7},   {850, 390.481125, 6e-7},
};

TEST(Platinum, MeetsIec60751) {
  for (const auto& p : kPlatinum) {
    const auto r = platinumResistance(at(p.celsius));
    ASSERT_TRUE(r);
    EXPECT_NEAR(r->in(ohm), p.value, p.tolerance) << p.celsius;
    const auto t = platinumTemperature(p.value * ohm);
    ASSERT_TRUE(t);
    EXPECT_NEAR(t->celsius(), p.celsius, p.tolerance / 0.29) << p.value;
  }
}

TEST(Platinum, ComesBackAllAlongItsRange) {
  for (double t = -200; t <= 850; t += 0.37) {
    const auto back = platinumTemperature(*platinumResistance(at(t), 1000 * ohm), 1000 * ohm);
    ASSERT_TRUE(back);
    EXPECT_NEAR(back->celsius(), t, 1e-10);
  }
}

TEST(Platinum, RefusesWhatNoElementGives) {
  EXPECT_FALSE(platinumTemperature(5 * ohm));
  EXPECT_FALSE(platinumTemperature(1e6 * ohm));
  EXPECT_FALSE(platinumTemperature(std::nan("") * ohm));
  EXPECT_FALSE(platinumResistance(at(900)));
}

struct Emf {
  ThermocoupleType type;
  double celsius, millivolts, tolerance;
};
constexpr auto J = ThermocoupleType::J, K = ThermocoupleType::K, T = ThermocoupleType::T;

// ITS-90 (NIST Monograph 175, SRD 60). K and T: computed from its coefficients in 40-digit arithmetic; -100
// and -40 of T meet the printed table (verified). The rest as printed to 0.001 mV (from memory): they check
// the other coefficients.
constexpr Emf kEmf[] = {
    {K, -100, -3.5536313, 6e-8}, {K, -40, -1.5269480, 6e-8}, {K, 20, 0.7981197, 6e-8},
    {K, 25, 1.0002424, 6e-8},    {K, 100, 4.0962302, 6e-8},  {K, 200, 8.1384733, 6e-8},
    {K, 400, 16.397142, 6e-7},   {K, -270, -6.458, 5e-4},    {K, -200, -5.891, 5e-4},
    {K, 1000, 41.276, 5e-4},     {K, 1372, 54.886, 5e-4},    {T, -100, -3.3785821, 6e-8},
    {T, -40, -1.4749919, 6e-8},  {T, 20, 0.78961164, 6e-9},  {T, 25, 0.99197727, 6e-9},
    {T, 100, 4.2785186, 6e-8},   {T, 200, 9.2881020, 6e-8},  {T, 400, 20.871970, 6e-7},
    {T, -270, -6.258, 5e-4},     {T, -200, -5.603, 5e-4},    {J, -210, -8.095, 5e-4},
    {J, -100, -4.633, 5e-4},     {J, 25, 1.277, 5e-4},       {J, 100, 5.269, 5e-4},
    {J, 200, 10.779, 5e-4},      {J, 400, 21.848, 5e-4},     {J, 760, 42.919, 5e-4},
    {J, 1000, 57.953, 5e-4},     {J, 1200, 69.553, 5e-4},
};

TEST(Thermocouple, MeetsIts90) {
  for (const auto& p : kEmf) {
    const auto v = thermocoupleVoltage(p.type, at(p.celsius));
    ASSERT_TRUE(v);
    EXPECT_NEAR(v->in(millivolt), p.millivolts, p.tolerance) << p.celsius;
  }
}

TEST(Thermocouple, ComesBackAllAlongItsRange) {
  for (const auto& [type, from, to] :
       {std::tuple{J, -210.0, 1200.0}, std::tuple{K, -250.0, 1372.0}, std::tuple{T, -250.0, 400.0}}) {
    for (double t = from; t <= to; t += 0.73) {
      const auto v = *thermocoupleVoltage(type, at(t));
      const auto back = thermocoupleTemperature(type, v - *thermocoupleVoltage(type, at(23.4)), at(23.4));
      ASSERT_TRUE(back) << t << ' ' << back.error().text();
      EXPECT_NEAR(back->celsius(), t, 1e-8);
    }
  }
}

// The two pieces of each function meet: a wrong digit in one of them would open a step or a kink.
TEST(Thermocouple, PiecesMeet) {
  for (const auto& [type, joint] : {std::pair{J, 760.0}, std::pair{K, 0.0}, std::pair{T, 0.0}}) {
    const auto v = [&](double t) { return thermocoupleVoltage(type, at(t))->in(millivolt); };
    EXPECT_NEAR(v(joint + 1e-6), v(joint), 1e-6);
    EXPECT_NEAR((v(joint + 1) - v(joint)) - (v(joint) - v(joint - 1)), 0, 3e-4);
  }
}

TEST(Thermocouple, RefusesWhatNoCoupleGives) {
  EXPECT_FALSE(thermocoupleTemperature(K, 80 * millivolt, at(20)));
  EXPECT_FALSE(thermocoupleTemperature(T, -9 * millivolt, at(20)));
  EXPECT_FALSE(thermocoupleTemperature(J, 1 * millivolt, at(5000)));
  EXPECT_FALSE(thermocoupleTemperature(J, std::nan("") * millivolt, at(20)));
}

}  // namespace
}  // namespace shuntwright::mechanics
