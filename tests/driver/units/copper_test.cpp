#include "driver/units/copper.h"

#include <gtest/gtest.h>

namespace {

using namespace shuntwright::units;

// Solid copper at 20 degC, ohm per 1000 ft, as printed in the standard wire table: quoted by HyperPhysics
// (Georgia State University, after Floyd); NBS Handbook 100 / ASTM B258 themselves were not opened.
struct WireRow {
  int awg;
  double printed_ohm_per_kft;
  double formula_ohm_per_m;  // 1/(58 MS/m x area), worked out apart from this program
};
constexpr WireRow kWires[] = {
    {20, 10.15, .0333090}, {21, 12.80, .0420019}, {22, 16.14, .0529634}, {23, 20.36, .0667856},
    {24, 25.67, .0842151}, {25, 32.37, .106193},  {26, 40.81, .133907},  {27, 51.47, .168854},
    {28, 64.90, .212921},  {29, 81.83, .268488},  {30, 103.2, .338557},
};

TEST(CopperLead, agreesWithThePrintedWireTable) {
  for (const WireRow& row : kWires) {
    const double got = copperLead(304.8 * metre, row.awg, Temperature::celsius(20)).in(ohm);
    // The printed figures have four digits; table and formula agree within half a unit of the fourth.
    EXPECT_NEAR(got, row.printed_ohm_per_kft, row.printed_ohm_per_kft * 5.1e-4) << "AWG " << row.awg;
  }
}

TEST(CopperLead, agreesWithTheFormulaToItsPrintedDigits) {
  for (const WireRow& row : kWires) {
    const double got = copperLead(1.0 * metre, row.awg, Temperature::celsius(20)).in(ohm);
    EXPECT_NEAR(got, row.formula_ohm_per_m, row.formula_ohm_per_m * 6e-6) << "AWG " << row.awg;
  }
}

// 10 m of AWG 26: 1.339 ohm; +40 K adds 15.72 % (0.00393 /K, IEC 60028 as quoted by a handbook page).
TEST(CopperLead, warmsAsIec60028Says) {
  const Resistance cold = copperLead(10.0 * metre, 26, Temperature::celsius(20));
  EXPECT_NEAR(cold.in(ohm), 1.339, 5e-4);
  EXPECT_NEAR(copperLead(10.0 * metre, 26, Temperature::celsius(60)) / cold, 1.1572, 1e-12);
}

TEST(CopperAt, movesAKnownResistanceThereAndBack) {
  const Resistance warm = copperAt(2.0 * ohm, Temperature::celsius(35), Temperature::celsius(-10));
  EXPECT_NEAR(warm.in(ohm), 2.0 * (1 - 0.00393 * 30) / (1 + 0.00393 * 15), 1e-12);
  EXPECT_NEAR(copperAt(warm, Temperature::celsius(-10), Temperature::celsius(35)).in(ohm), 2.0, 1e-12);
}

}  // namespace
