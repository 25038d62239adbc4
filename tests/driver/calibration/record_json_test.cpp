#include "driver/calibration/record_json.h"

#include <gtest/gtest.h>

#include <limits>

namespace shuntwright::calibration {
namespace {

using namespace units;

Record example() {
  Record record;
  record.id = "20260504-093000-7f3a";
  record.started = VirtualClock::kDefaultStart;
  record.software = "shuntwright 0.1.0";
  record.rackName = "bench";
  record.rackFile = "bench.toml";
  ChannelResult c;
  c.name = "S01";
  c.verdict = Verdict::fail;
  c.findings.push_back({"noisy", "the channel is noisy", "12 microstrain"});
  c.spanRatio = 1.00125;
  BudgetLine line;
  line.quantity = "shunt resistor R1";
  line.value = 59880;
  line.unit = "ohm";
  line.distribution = "rectangular";
  line.degreesOfFreedom = std::numeric_limits<double>::infinity();
  line.standardUncertainty = 34.6;
  c.budget.lines.push_back(line);
  c.budget.effectiveDegreesOfFreedom = std::numeric_limits<double>::infinity();
  c.budget.expandedUncertainty_percent = 0.11;
  c.zero = 0.25 * millivolt_per_volt;
  ShuntResult shunt;
  shunt.name = "cal";
  shunt.measuredStep = 0.5 * millivolt_per_volt;
  shunt.repeats = 2;
  c.shunts.push_back(shunt);
  c.correction = {2003.25, -0.5, -1.99, {0.5, -0.25, 1e-3, 2e-5}};
  c.straightness = Straightness{0.05, 0.02, 3.5, 1, 0.06};
  c.strainUncertainty = {{0.0 * microstrain, 0.5 * microstrain, 0.5 * microstrain},
                         {1500.0 * microstrain, 2.5 * microstrain, 8.0 * microstrain}};
  LeadIdentification leads;
  leads.resistance = 5.125 * ohm;
  leads.expandedUncertainty = 0.015625 * ohm;
  leads.identifiable = true;
  leads.leads = {{description::Terminal::comp, 5.25 * ohm, 0.5 * ohm, true}};
  leads.budget = {{"completion resistor of arm 2", 0.0078125 * ohm}};
  leads.advice = LeadAdvice{"switch RC to COMP and EXC- as well", 0.00390625 * ohm};
  c.leads = leads;
  record.channels.push_back(c);
  ChannelResult bare;
  bare.name = "T1";
  bare.unit = "degC";
  record.channels.push_back(bare);
  record.windows = 12;
  record.duration = std::chrono::milliseconds(4321);
  return record;
}

TEST(RecordJson, whatIsWrittenReadsBackAndWritesTheSameAgain) {
  const std::string text = recordJson(example());
  auto back = parseRecordJson(text, "test");
  ASSERT_TRUE(back.has_value()) << back.error().text();
  EXPECT_EQ(recordJson(*back), text);
  EXPECT_EQ(back->channels[0].correction.p, 2003.25);
  EXPECT_EQ(back->channels[0].correction.bend, (std::array<double, 4>{0.5, -0.25, 1e-3, 2e-5}));
  EXPECT_EQ(back->channels[0].verdict, Verdict::fail);
  ASSERT_TRUE(back->channels[0].leads);
  EXPECT_EQ(back->channels[0].leads->resistance.in(ohm), 5.125);
  EXPECT_EQ(back->channels[0].leads->leads[0].terminal, description::Terminal::comp);
  ASSERT_EQ(back->channels[0].strainUncertainty.size(), 2u);
  EXPECT_FALSE(back->channels[1].leads);
}

TEST(RecordJson, unknownIsNull) {
  const std::string text = recordJson(example());
  EXPECT_NE(text.find("\"degrees_of_freedom\":null"), std::string::npos);
  EXPECT_NE(text.find("\"lead_resistance_ohm\":null"), std::string::npos);
  EXPECT_NE(text.find("\"span_ratio\":null"), std::string::npos) << "a channel without shunts has no span";
}

TEST(RecordJson, otherTextIsRefusedWithItsSource) {
  for (const char* text : {"", "{", "[]", "{\"record_id\":1}", "{\"record_id\":\"x\"}"}) {
    auto back = parseRecordJson(text, "some/file.json");
    ASSERT_FALSE(back.has_value()) << text;
    EXPECT_EQ(back.error().where, "some/file.json");
    EXPECT_FALSE(back.error().remedy.empty());
  }
}

TEST(Record, passesOnlyWhenNoChannelFailedAndNoRelayIsLeft) {
  Record record = example();
  EXPECT_FALSE(record.passed());
  record.channels[0].verdict = Verdict::pass;
  EXPECT_TRUE(record.passed());
  record.relaysMaybeClosed.push_back("relays1/3");
  EXPECT_FALSE(record.passed());
}

}  // namespace
}  // namespace shuntwright::calibration
