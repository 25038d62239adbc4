// proves P-16
#include "driver/calibration/lead_identification.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <memory>
#include <sstream>

#include "driver/calibration/lead_readings.h"
#include "driver/core/random.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright::calibration {
namespace {

using namespace units;
using description::Channel;
using description::Terminal;

/// A 3-wire quarter bridge of 120 ohm with one resistor switched between the completion resistor (ii) and the
/// far end of the gauge (iv): the positions of the three-wire table.
struct Bench {
  description::Rack rack = test::shippedRack("small_bench.toml");
  Channel channel;
  Ratio noise =
      std::sqrt(1.5) * 0.02e-6 * volt_per_volt;  // before, after and return, 0.02 microvolt per volt each

  explicit Bench(double leads_ohm) {
    channel = *rack.channel("Q3");
    channel.gauge = "G120";
    channel.completion = 120.0 * ohm;
    channel.measuredResistance = description::Toleranced{120.0 * ohm, 0.01 * percent};
    channel.leadLoss = description::LeadLoss::identified;
    for (auto& [terminal, lead] : channel.leads) {
      lead.resistance = leads_ohm * ohm;
      lead.tolerance = 0.1 * percent;
    }
    inputs().halfBridge.tolerance = 0.005 * percent;
    inputs().zeroOffset = 1e-6 * volt_per_volt;
    for (auto& offered : inputs().completions) offered.tolerance = 0.01 * percent;
    auto& relays = *relaysProfile().relays;
    relays.contactTolerance = 0.05 * ohm;
    const auto shunt = channel.shunts.front();
    channel.shunts.clear();
    add(shunt, "RC2", Terminal::exc_plus, Terminal::comp);
    add(shunt, "RC2", Terminal::comp, Terminal::exc_minus);
  }

  void add(description::Shunt shunt, const char* resistor, Terminal a, Terminal b) {
    shunt.name = "shunt " + std::to_string(channel.shunts.size() + 1);
    shunt.resistor = resistor;
    shunt.across = {a, b};
    shunt.relay.relay = 10 + static_cast<int>(channel.shunts.size());
    channel.shunts.push_back(shunt);
  }

  description::Inputs& inputs() { return *profileOf(rack.devices[0]).inputs; }
  description::Profile& relaysProfile() { return profileOf(rack.devices[1]); }

  /// What a bench that differs from what is stated reads; `span` is its amplifier's.
  LeadReadings readingsOf(const ChannelModel& real, double span, Random* random = nullptr) const {
    std::vector<Ratio> steps;
    const auto off = [&](double u) { return (random ? u * random->normal() : 0) * volt_per_volt; };
    const Ratio before = *bridge::ratio(real.atCalibration, {});
    for (const auto& path : real.shunts) {
      const Ratio after = *bridge::ratio(real.atCalibration, {}, {&path, 1});
      steps.push_back(span * (after - before) + off(noise.in(volt_per_volt)));
    }
    const double offset = rack.devices[0].profile->inputs->zeroOffset.in(volt_per_volt);
    const Ratio zero =
        span * before + off(0.02e-6) + (random ? random->uniform(-offset, offset) : 0) * volt_per_volt;
    return leadReadingsOf(rack, channel, steps, std::vector<Ratio>(steps.size(), noise), zero,
                          0.02e-6 * volt_per_volt);
  }

  LeadIdentification ideal(double span = 1.01) const {
    return found(readingsOf(modelWithLeads(rack, channel), span));
  }

  static LeadIdentification found(const LeadReadings& readings) {
    auto fit = LeadFit::of(readings);
    EXPECT_TRUE(fit) << fit.error().text();
    return fit ? identified(*fit) : LeadIdentification{};
  }

 private:
  description::Profile& profileOf(description::Device& device) {
    auto copy = std::make_shared<description::Profile>(*device.profile);
    device.profile = copy;
    return *copy;
  }
};

// With equal leads and gauge and completion alike, -(iv)/(ii) = 1 + 2 R_L / R_d exactly, whatever the
// resistor, the amplifier's span and the excitation (network algebra; the three-wire table's last row).
TEST(LeadIdentification, oneResistorInTwoPositionsTellsLeadsAndSpan) {
  for (const double leads : {0.5, 1.0, 5.0, 10.0, 25.0}) {
    SCOPED_TRACE(leads);
    Bench bench(leads);
    auto readings = bench.readingsOf(modelWithLeads(bench.rack, bench.channel), 1.037);
    const double ratio = -readings.steps[1].in(volt_per_volt) / readings.steps[0].in(volt_per_volt);
    ASSERT_NEAR(120 * (ratio - 1) / 2, leads, 1e-7);
    // The search starts somewhere else.
    for (auto& [terminal, share] : readings.inequality) {
      readings.nominal.atCalibration.lead(terminal) = readings.nominal.inTest.lead(terminal) =
          0.6 * leads * ohm;
    }
    const auto found = Bench::found(readings);
    EXPECT_TRUE(found.identifiable) << found.reason;
    EXPECT_NEAR(found.resistance.in(ohm), leads, 2e-5 * leads + 1e-5);
    EXPECT_NEAR(found.span, 1.037, 2e-5);
    EXPECT_LE(found.expandedUncertainty.in(ohm), 0.03);
    EXPECT_GT(found.expandedUncertainty.in(ohm), 0.003);
  }
}

/// Benches drawn about what is stated: how often the true mean lead lies inside, in percent.
double inside_percent(Bench& bench, int benches, std::uint64_t seed) {
  const auto inputs = inputsOf(bench.rack, bench.channel);
  Random random(seed);
  int inside = 0;
  for (int b = 0; b < benches; ++b) {
    ChannelModel real = modelWithLeads(bench.rack, bench.channel);
    for (const auto& in : inputs) {
      if (in.input.quantity.starts_with("lead temperature")) continue;  // what is found is what it is then
      in.shift(real, in.input.distribution.draw(random) - in.input.distribution.mean);
    }
    const double mean =
        (real.atCalibration.lead(Terminal::exc_minus) + real.atCalibration.lead(Terminal::comp)).in(ohm) / 2;
    const auto found = Bench::found(bench.readingsOf(real, 1 + 0.01 * random.uniform(-1, 1), &random));
    inside += std::abs(found.resistance.in(ohm)-mean) <= found.expandedUncertainty.in(ohm);
  }
  return 100.0 * inside / benches;
}

// 700 benches: binomial standard deviation 0.8 %; three of them to either side, and rectangles whose
// posterior is narrower than themselves count a little on the safe side.
TEST(LeadIdentification, isHonest) {
  for (const double leads : {0.5, 5.0, 25.0}) {
    SCOPED_TRACE(leads);
    Bench bench(leads);
    const double share = inside_percent(bench, 700, 3);
    EXPECT_GE(share, 95.45 - 2.4);
    EXPECT_LE(share, 95.45 + 3.3);
  }
}

/// Does what the advice says.
void follow(Bench& bench, const std::string& advice) {
  if (advice.starts_with("switch RC2 to ")) {
    std::istringstream words(advice.substr(std::string("switch RC2 to ").size()));
    std::string first, with, second;
    words >> first >> with >> second;
    bench.add(bench.channel.shunts[0], "RC2", *description::terminalNamed(first),
              *description::terminalNamed(second));
  } else if (advice.starts_with("know the completion resistor")) {
    for (auto& offered : bench.inputs().completions) offered.tolerance = 0.01 * percent;
  } else if (advice.starts_with("know the gauge resistance")) {
    bench.channel.measuredResistance = description::Toleranced{120.0 * ohm, 0.01 * percent};
  } else if (advice.starts_with("know the half-bridge")) {
    bench.inputs().halfBridge.tolerance = 0.01 * percent;
  } else {
    ADD_FAILURE() << "an advice that nobody can follow here: " << advice;
  }
}

/// The interval is honest, and what is advised narrows it as promised.
void expectHonestAndWellAdvised(Bench& bench, std::uint64_t seed) {
  EXPECT_GE(inside_percent(bench, 500, seed), 95.45 - 2.8);
  const auto now = bench.ideal();
  ASSERT_TRUE(now.advice);
  Bench better = bench;
  follow(better, now.advice->what);
  const auto then = better.ideal();
  EXPECT_LT(then.expandedUncertainty, 0.9 * now.expandedUncertainty) << now.advice->what;
  EXPECT_NEAR(then.expandedUncertainty / now.advice->expandedUncertainty, 1, 0.25) << now.advice->what;
}

TEST(LeadIdentification, isHonestlyWiderWithAWorseCompletion) {
  Bench good(5), poor(5);
  // An offset of the amplifier beyond use, or the zero reading would tell the completion from the gauge.
  for (Bench* bench : {&good, &poor}) bench->inputs().zeroOffset = 1e-3 * volt_per_volt;
  for (auto& offered : poor.inputs().completions) offered.tolerance = 0.1 * percent;
  const auto narrow = good.ideal(), wide = poor.ideal();
  EXPECT_LE(narrow.expandedUncertainty.in(ohm), 0.03);
  EXPECT_GT(wide.expandedUncertainty, 2 * narrow.expandedUncertainty);
  ASSERT_FALSE(wide.budget.empty());
  EXPECT_NE(wide.budget.front().quantity.find("completion"), std::string::npos);
  expectHonestAndWellAdvised(poor, 5);
}

TEST(LeadIdentification, isHonestlyWiderWithAGaugeKnownToItsTolerance) {
  Bench bench(5);
  bench.channel.measuredResistance.reset();
  bench.inputs().zeroOffset = 1e-3 * volt_per_volt;
  const auto found = bench.ideal();
  EXPECT_GT(found.expandedUncertainty.in(ohm), 0.05);
  EXPECT_NE(found.budget.front().quantity.find("gauge"), std::string::npos);
  expectHonestAndWellAdvised(bench, 6);
}

TEST(LeadIdentification, separateResistorsAreHonestlyWorse) {
  Bench bench(5);
  bench.channel.shunts[1].resistor = "RC3";
  bench.rack.resistors.at("RC3") = bench.rack.resistors.at("RC2");
  const auto found = bench.ideal();
  EXPECT_GT(found.expandedUncertainty.in(ohm), 0.05);
  expectHonestAndWellAdvised(bench, 7);
}

TEST(LeadIdentification, stepsThatChangeAlikeDoNotTell) {
  Bench bench(5);
  auto second = bench.channel.shunts[0];
  second.name = "the same again";
  bench.channel.shunts[1] = second;
  const auto found = bench.ideal();
  EXPECT_FALSE(found.identifiable);
  EXPECT_NE(found.reason.find("alike"), std::string::npos) << found.reason;
  ASSERT_TRUE(found.advice);
  EXPECT_NE(found.advice->what.find("switch"), std::string::npos) << found.advice->what;
  Bench one(5);
  one.channel.shunts.pop_back();
  const auto single = one.ideal();
  EXPECT_FALSE(single.identifiable);
  EXPECT_NE(single.reason.find("one shunt"), std::string::npos) << single.reason;
}

// Lead 3, to SIG+, carries no current: only a shunt at its end sees it. The table's position (iii) is one.
TEST(LeadIdentification, unequalLeadsAreToldApartWhereTheDataCan) {
  Bench bench(5);
  for (auto& [terminal, lead] : bench.channel.leads) lead.tolerance = 20.0 * percent;
  const auto nothing = bench.ideal();
  for (const auto& lead : nothing.leads) {
    EXPECT_EQ(lead.toldApart, lead.terminal != Terminal::sig_plus) << description::name(lead.terminal);
  }
  bench.add(bench.channel.shunts[0], "RC2", Terminal::sig_plus, Terminal::exc_minus);
  ChannelModel real = modelWithLeads(bench.rack, bench.channel);
  real.atCalibration.lead(Terminal::sig_plus) = 5.8 * ohm;
  const auto told = Bench::found(bench.readingsOf(real, 1));
  for (const auto& lead : told.leads) {
    if (lead.terminal != Terminal::sig_plus) continue;
    EXPECT_TRUE(lead.toldApart);
    EXPECT_NEAR(lead.resistance.in(ohm), 5.8, lead.expandedUncertainty.in(ohm));
    EXPECT_LT(lead.expandedUncertainty.in(ohm), 0.4);
  }
}

TEST(LeadIdentification, aWrongResistorDoesNotFit) {
  Bench bench(5);
  bench.add(bench.channel.shunts[0], "RC2", Terminal::sig_plus, Terminal::exc_minus);
  auto readings = bench.readingsOf(modelWithLeads(bench.rack, bench.channel), 1);
  EXPECT_GT(Bench::found(readings).probability, 0.5);
  readings.steps[2] = 1.02 * readings.steps[2];
  EXPECT_LT(Bench::found(readings).probability, 1e-4);
}

// JCGM 101 through the same network, with the search run anew for every draw.
TEST(LeadIdentification, aMonteCarloAgrees) {
  Bench bench(10);
  const auto readings = bench.readingsOf(modelWithLeads(bench.rack, bench.channel), 0.99);
  auto fit = LeadFit::of(readings);
  ASSERT_TRUE(fit) << fit.error().text();
  const auto stated = identified(*fit);
  Random random(8);
  std::vector<double> means;
  for (int trial = 0; trial < 4000; ++trial) {
    std::vector<double> rows;
    for (const auto& row : fit->rows()) rows.push_back(row.distribution.draw(random));
    // Leads and span are not known beforehand: their rows have nothing to say.
    const std::size_t data = fit->dataRows();
    rows[data + LeadFit::kCommon] = fit->rows()[data + LeadFit::kCommon].distribution.mean;
    rows[data + LeadFit::kSpan] = fit->rows()[data + LeadFit::kSpan].distribution.mean;
    const auto t = fit->estimateFor(rows);
    ASSERT_TRUE(t);
    const auto model = fit->situationAt(*t).model;
    means.push_back(
        (model.atCalibration.lead(Terminal::exc_minus) + model.atCalibration.lead(Terminal::comp)).in(ohm) /
        2);
  }
  std::ranges::sort(means);
  const double half = (means[3909] - means[90]) / 2;  // 95.45 % of 4000
  EXPECT_NEAR(half, stated.expandedUncertainty.in(ohm), 0.06 * half);
}

}  // namespace
}  // namespace shuntwright::calibration
