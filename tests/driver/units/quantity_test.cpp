#include "driver/units/quantity.h"

#include <gtest/gtest.h>

#include "driver/units/units.h"

namespace {

using namespace shuntwright::units;

template <class A, class B>
concept Adds = requires(A a, B b) {
  a + b;
};
template <class A, class B>
concept Subtracts = requires(A a, B b) {
  a - b;
};
template <class A, class B>
concept Compares = requires(A a, B b) {
  a < b;
};
template <class A, class B>
concept Multiplies = requires(A a, B b) {
  a* b;
};
template <class A, class B>
concept Divides = requires(A a, B b) {
  a / b;
};
template <class Q, class U>
concept ReadsIn = requires(Q q, U u) {
  q.in(u);
};
template <class To, class From>
concept Takes = requires(From from) {
  To{from};
};

// What must not compile.
static_assert(!Adds<Resistance, Voltage>);
static_assert(!Adds<Ratio, Strain>);
static_assert(!Adds<Strain, Fraction>);
static_assert(!Adds<Resistance, double>);
static_assert(!Subtracts<Ratio, Fraction>);
static_assert(!Compares<Strain, Ratio>);
static_assert(!Compares<Resistance, double>);
static_assert(!Multiplies<Resistance, Resistance>);
static_assert(!Divides<Resistance, Voltage>);
static_assert(!Divides<double, Resistance>);
static_assert(!ReadsIn<Resistance, decltype(volt)>);
static_assert(!ReadsIn<Ratio, decltype(microstrain)>);
static_assert(!Takes<Resistance, double>);
static_assert(!Takes<Strain, Ratio>);
static_assert(!Takes<double, Ratio>);
static_assert(!Takes<Ratio, GaugeFactor>);
static_assert(!Adds<Temperature, Temperature>);
static_assert(!Multiplies<GaugeFactor, Strain>);
static_assert(!std::is_convertible_v<double, GaugeFactor>);
static_assert(!std::is_convertible_v<double, Temperature>);

// What must.
static_assert(Adds<Resistance, Resistance> && Subtracts<Ratio, Ratio> && Compares<Strain, Strain>);
static_assert(std::same_as<decltype(Resistance{} / Resistance{}), double>);
static_assert(std::same_as<decltype(Temperature{} - Temperature{}), TemperatureDifference>);
static_assert(std::same_as<decltype(Temperature{} + TemperatureDifference{}), Temperature>);
static_assert(std::same_as<decltype(TemperatureCoefficient{} * TemperatureDifference{}), Fraction>);

TEST(Quantity, goesInAndOutByUnit) {
  const Resistance r = 59.88 * kiloohm;
  EXPECT_DOUBLE_EQ(r.in(ohm), 59880.0);
  EXPECT_DOUBLE_EQ((0.5 * millivolt_per_volt).in(volt_per_volt), 0.5e-3);
  EXPECT_DOUBLE_EQ((1.0 * strain).in(microstrain), 1e6);
  EXPECT_DOUBLE_EQ((25.0 * ppm_per_kelvin * (4.0 * kelvin)).in(ppm), 100.0);
}

TEST(Quantity, addsScalesAndCompares) {
  Resistance r = 1.0 * ohm;
  r += 500.0 * milliohm;
  r -= 0.25 * ohm;
  EXPECT_DOUBLE_EQ(r.in(ohm), 1.25);
  EXPECT_DOUBLE_EQ((-r).in(ohm), -1.25);
  EXPECT_DOUBLE_EQ((2 * r + r * 2 - r / 2).in(ohm), 4.375);
  EXPECT_DOUBLE_EQ((120.0 * ohm) / (0.12 * kiloohm), 1.0);
  EXPECT_LT(999.0 * ohm, 1.0 * kiloohm);
}

TEST(Temperature, isAPointAndItsDifferenceIsNot) {
  const Temperature room = Temperature::celsius(22);
  EXPECT_DOUBLE_EQ((room - Temperature::celsius(20)).in(kelvin), 2.0);
  EXPECT_DOUBLE_EQ((room + 5.0 * kelvin).celsius(), 27.0);
}

}  // namespace
