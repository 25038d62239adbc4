// proves P-02
#include <gtest/gtest.h>

#include "driver/bridge/rational_map.h"
#include "driver/bridge/shunt_step.h"
#include "tests/driver/bridge/circuits.h"

// Shunt resistances and the strains they simulate: R_c = R_g/(K |e|) - R_g and r = x/(4 + 2x), exact by Ohm's
// law (computed; the relations stand in Hannah & Reed, Strain Gage Users' Handbook, and Dally & Riley,
// Experimental Stress Analysis: from memory).
namespace shuntwright::bridge {
namespace {

using namespace test;

struct Printed {
  double strain_microstrain, r120, r350, r1000, exact_mV_per_V;
};
constexpr Printed kTable[] = {
    {-100, 599880.0, 1749650.0, 4999000.0, -0.050005000500},
    {-200, 299880.0, 874650.0, 2499000.0, -0.100020004001},
    {-500, 119880.0, 349650.0, 999000.0, -0.250125062531},
    {-1000, 59880.0, 174650.0, 499000.0, -0.500500500501},
    {-2000, 29880.0, 87150.0, 249000.0, -1.00200400802},
    {-3000, 19880.0, 57983.0 + 1.0 / 3, 165666.0 + 2.0 / 3, -1.50451354062},
    {-5000, 11880.0, 34650.0, 99000.0, -2.51256281407},
    {-10000, 5880.0, 17150.0, 49000.0, -5.05050505051},
};

TEST(ShuntValues, SimulateThePrintedStrain) {
  for (const auto& row : kTable) {
    for (const auto& [gauge, shunt] :
         {std::pair{120.0, row.r120}, std::pair{350.0, row.r350}, std::pair{1000.0, row.r1000}}) {
      const auto s = predictStep(circuit(CircuitKind::quarter_3_wire, gauge), {}, acrossTabs(shunt));
      ASSERT_TRUE(s) << s.error().text();
      EXPECT_NEAR(s->simulated.in(microstrain), row.strain_microstrain, 1e-7);
      EXPECT_NEAR(s->step.in(millivolt_per_volt), row.exact_mV_per_V, 6e-12);
    }
  }
}

TEST(ShuntValues, OffNominalResistorsGiveThePrintedStrain) {
  struct Row {
    double gauge_ohm, shunt_ohm, strain_microstrain, step_mV_per_V;
  };
  for (const Row& row :
       {Row{350, 100e3, -1743.89636273, -0.873471425006}, Row{350, 59e3, -2948.60994103, -1.47866497676},
        Row{120, 100e3, -599.280862964, -0.299820107935}, Row{120, 60e3, -998.003992016, -0.499500499500}}) {
    const auto s =
        predictStep(circuit(CircuitKind::quarter_3_wire, row.gauge_ohm), {}, acrossTabs(row.shunt_ohm));
    ASSERT_TRUE(s) << s.error().text();
    EXPECT_NEAR(s->simulated.in(microstrain), row.strain_microstrain, 6e-9);
    EXPECT_NEAR(s->step.in(millivolt_per_volt), row.step_mV_per_V, 6e-12);
  }
}

TEST(ShuntValues, InverseOfTheQuarterBridge) {
  for (const auto& row : kTable) {
    const auto e = strainOf(circuit(CircuitKind::quarter_3_wire), row.exact_mV_per_V * millivolt_per_volt);
    ASSERT_TRUE(e);
    EXPECT_NEAR(e->in(microstrain), row.strain_microstrain, 2e-8);  // the printed digits allow no better
    const auto mirrored = strainOf(circuit(CircuitKind::quarter_3_wire), 0.499500499500 * millivolt_per_volt);
    EXPECT_NEAR(mirrored->in(microstrain), 1000, 2e-9);
  }
}

// 0.1 ohm of relay contact in 174 650 ohm is 0.6 ppm of the step.
TEST(ShuntValues, RelayContactAddsToTheShunt) {
  const Circuit c = circuit(CircuitKind::quarter_3_wire, 350);
  const auto without = stepOf(c, {}, acrossTabs(174650)), with = stepOf(c, {}, acrossTabs(174650.1));
  ASSERT_TRUE(without && with);
  EXPECT_NEAR((*with / *without - 1) * 1e6, -0.57, 0.01);
}

}  // namespace
}  // namespace shuntwright::bridge
