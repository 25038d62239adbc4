// proves P-02
#include <gtest/gtest.h>

#include <fstream>
#include <map>
#include <sstream>

#include "driver/bridge/shunt_step.h"
#include "tests/driver/bridge/circuits.h"

// The three-wire quarter bridge with leads, against tests/reference/data/threewire.csv (computed with 40
// digits).
namespace shuntwright::bridge {
namespace {

using namespace test;

struct Row {
  double gauge_ohm = 0, lead_ohm = 0, shunt_ohm = 0;
  std::string position;
  double delta_mV_per_V = 0;
};

std::vector<Row> table() {
  std::ifstream file(SHUNTWRIGHT_SOURCE_DIR "/tests/reference/data/threewire.csv");
  std::vector<Row> rows;
  for (std::string line; std::getline(file, line);) {
    if (line.empty() || line.front() == '#' || line.front() == 'R') continue;
    std::istringstream in(line);
    Row row;
    char comma = 0;
    in >> row.gauge_ohm >> comma >> row.lead_ohm >> comma >> row.shunt_ohm >> comma;
    std::getline(in, row.position, ',');
    in >> row.delta_mV_per_V;
    EXPECT_TRUE(in) << line;
    rows.push_back(row);
  }
  return rows;
}

double stepOfRow(const Row& row) {
  Circuit c = circuit(CircuitKind::quarter_3_wire, row.gauge_ohm, row.lead_ohm);
  if (row.position == "base") return millivolts(c, 0);
  if (row.position == "strain+1000") return millivolts(c, 1000) - millivolts(c, 0);
  if (row.position == "strain-1000") return millivolts(c, -1000) - millivolts(c, 0);
  if (row.position.ends_with("_1k")) c.arms[2].resistance = c.arms[3].resistance = 1000.0 * ohm;
  const std::map<std::string, ShuntPath> paths = {
      {"i", acrossTabs(row.shunt_ohm)},
      {"ii", acrossCompletion(row.shunt_ohm)},
      {"iii", throughSenseLead(row.shunt_ohm)},
      {"iv", fromCompletionTerminal(row.shunt_ohm)},
      {"v_top", acrossUpperHalfBridge(row.shunt_ohm)},
      {"v_top_1k", acrossUpperHalfBridge(row.shunt_ohm)},
      {"v_bot", acrossLowerHalfBridge(row.shunt_ohm)},
      {"v_bot_1k", acrossLowerHalfBridge(row.shunt_ohm)},
  };
  const auto step = stepOf(c, {}, paths.at(row.position));
  return step ? step->in(millivolt_per_volt) : std::nan("");
}

TEST(ThreeWireTable, EveryPositionAndLeadToTheLastDigit) {
  const auto rows = table();
  ASSERT_EQ(rows.size(), 110u);
  for (const Row& row : rows) {
    EXPECT_NEAR(stepOfRow(row), row.delta_mV_per_V, 1.5e-12 /* mV/V: rounding of two ratios near 0.5 */)
        << row.gauge_ohm << " ohm, leads " << row.lead_ohm << " ohm, position " << row.position;
  }
}

TEST(ThreeWireTable, DesensitisationOfSmallStrain) {
  struct Printed {
    double gauge_ohm, at1, at5, at10, at25;
  };
  for (const Printed& p : {Printed{120, .991735537, .96, .923076923, .827586207},
                           Printed{350, .997150997, .985915493, .972222222, .933333333},
                           Printed{1000, .999000999, .995024876, .990099010, .975609756}}) {
    for (const auto& [lead, loss] : {std::pair{1.0, p.at1}, {5.0, p.at5}, {10.0, p.at10}, {25.0, p.at25}}) {
      const auto slope = [&](double l) {
        const Circuit c = circuit(CircuitKind::quarter_3_wire, p.gauge_ohm, l);
        return millivolts(c, 1) - millivolts(c, -1);
      };
      EXPECT_NEAR(slope(lead) / slope(0), loss, 1e-9);
    }
  }
}

}  // namespace
}  // namespace shuntwright::bridge
