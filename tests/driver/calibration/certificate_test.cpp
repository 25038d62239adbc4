#include <gtest/gtest.h>

#include "driver/calibration/channel_model.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright::calibration {
namespace {

using namespace std::chrono_literals;

int remarks(const Record& record) {
  int count = 0;
  for (const auto& channel : record.channels) {
    for (const auto& finding : channel.findings) count += finding.code == "certificate-overdue";
  }
  return count;
}

// The clock passed in says which day it is.
TEST(Certificate, anOverdueOneIsNotedInTheRecordAndFailsNothing) {
  const auto recordWith = [](std::chrono::year_month_day due) {
    auto rack = test::shippedRack("small_bench.toml");
    for (auto& [name, resistor] : rack.resistors) resistor.due = due;
    test::VirtualBench bench(rack);
    auto record = bench.calibrate();
    EXPECT_TRUE(record) << record.error().text();
    return *record;
  };
  const Record good = recordWith(2900y / 1 / 1), late = recordWith(1960y / 1 / 1);
  EXPECT_EQ(remarks(good), 0);
  int shunted = 0;
  for (std::size_t k = 0; k < late.channels.size(); ++k) {
    shunted += !late.channels[k].shunts.empty();
    EXPECT_EQ(late.channels[k].verdict, good.channels[k].verdict) << late.channels[k].name;
  }
  EXPECT_GT(shunted, 0);
  EXPECT_GE(remarks(late), shunted);
}

}  // namespace
}  // namespace shuntwright::calibration
