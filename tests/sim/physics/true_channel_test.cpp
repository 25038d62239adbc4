// What the simulator takes a channel to be, against closed forms (Ohm's law) and printed tables.
#include "sim/physics/true_channel.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <memory>

namespace shuntwright::sim {
namespace {

using namespace units;
using description::CircuitKind;
using description::Side;
using description::Terminal;

/// One channel whose parts are all exactly nominal.
struct Exact {
  explicit Exact(CircuitKind kind, double gauge_ohm, double lead_ohm = 0, double halfBridge_ohm = 0) {
    auto profile = std::make_shared<description::Profile>();
    profile->inputs.emplace();
    profile->inputs->count = 1;
    profile->inputs->inputResistance = 1e9 * gigaohm;
    profile->inputs->halfBridge = {(halfBridge_ohm > 0 ? halfBridge_ohm : gauge_ohm) * ohm, 0.02 * percent};
    profile->inputs->completions = {{gauge_ohm * ohm, 0.1 * percent}};
    rack.devices.resize(1);
    rack.devices[0].name = "amp";
    rack.devices[0].profile = profile;
    auto& sheet = rack.gauges["G"];
    sheet.factor = GaugeFactor(2.0);
    sheet.resistance = {gauge_ohm * ohm, 0.3 * percent};
    channel.name = "C";
    channel.device = "amp";
    channel.input = 1;
    channel.circuit = kind;
    channel.gauge = "G";
    channel.completion = gauge_ohm * ohm;
    for (const auto terminal : description::leadsOf(kind, false))
      channel.leads[terminal].resistance = lead_ohm * ohm;
    none.gauges = none.completions = none.leads = none.resistors = none.gaugeFactors = none.contacts = 0;
    none.leadsWarm = false;
  }

  void shunt(double value_ohm, Terminal a, Terminal b, Side side) {
    rack.resistors["RC"].value = value_ohm * ohm;
    description::Shunt one;
    one.resistor = "RC";
    one.across = {a, b};
    one.side = side;
    channel.shunts = {one};
  }

  TrueChannel build(const Imperfections& imperfections, const ChannelFaults& faults = {},
                    std::uint64_t seed = 1) {
    return TrueChannel(rack, channel, imperfections, faults, Random(seed));
  }
  double mV_per_V(double microstrains) { return 1e3 * build(none).ratio(1e-6 * microstrains, 0); }
  double step_mV_per_V() {
    auto truth = build(none);
    const double before = truth.ratio(0, 0);
    truth.shunts()[0].closed = true;
    return 1e3 * (truth.ratio(0, 0) - before);
  }

  description::Rack rack;
  description::Channel channel;
  Imperfections none;
};

// Four-arm equation with K = 2, Poisson's ratio 0.3, mV/V (computed with 40 digits from the closed forms
// x/(4+2x), x/(2+x), x(1+nu)/(4+2x(1-nu)), x(1+nu)/(2+x(1-nu))).
TEST(TrueChannel, everyBridgeWithoutLeads) {
  const auto at = [](CircuitKind kind, double e) { return Exact(kind, 350).mV_per_V(e); };
  EXPECT_NEAR(at(CircuitKind::quarter_2_wire, 1000), 0.499500499500, 2e-12);
  EXPECT_NEAR(at(CircuitKind::quarter_3_wire, 10000), 4.95049504950, 2e-11);
  EXPECT_NEAR(at(CircuitKind::quarter_3_wire, -5000), -2.51256281407, 2e-11);
  EXPECT_NEAR(at(CircuitKind::half_opposite, 5000), 4.97512437811, 2e-11);
  EXPECT_NEAR(at(CircuitKind::half_opposite, -1000), -1.00100100100, 2e-11);
  EXPECT_NEAR(at(CircuitKind::half_poisson, 1000), 0.649545318277, 2e-12);
  EXPECT_NEAR(at(CircuitKind::half_poisson, -5000), -3.26141495233, 2e-11);
  EXPECT_NEAR(at(CircuitKind::full_poisson, 10000), 12.9096325720, 2e-10);
  // Exactly linear: x/2 and x.
  EXPECT_NEAR(at(CircuitKind::half_bending, 3000), 3, 1e-11);
  EXPECT_NEAR(at(CircuitKind::full_bending, 3000), 6, 1e-11);
  EXPECT_NEAR(at(CircuitKind::full_shear, -3000), -6, 1e-11);
  // x(1+nu)/2 / (1 - x^2 (1-nu)^2 / 4).
  const double x = 0.02;
  EXPECT_NEAR(at(CircuitKind::full_bending_poisson, 10000), 1e3 * x * 0.65 / (1 - x * x * 0.49 / 4), 1e-11);
}

// Shunted gauge, r = x/(4+2x), x = K e, e = -R/(K (R + Rc)): 350 ohm with 100 kohm and 59 kohm, 120 ohm with
// 60 kohm, mV/V (computed with 40 digits).
TEST(TrueChannel, aShuntedGauge) {
  const auto at = [](double gauge_ohm, double shunt_ohm) {
    Exact one(CircuitKind::quarter_2_wire, gauge_ohm);
    one.shunt(shunt_ohm, Terminal::sig_plus, Terminal::exc_minus, Side::gauge);
    return one.step_mV_per_V();
  };
  EXPECT_NEAR(at(350, 100e3), -0.873471425006, 2e-12);
  EXPECT_NEAR(at(350, 59e3), -1.47866497676, 2e-11);
  EXPECT_NEAR(at(120, 60e3), -0.499500499500, 2e-12);
}

// The three-wire quarter bridge with leads, shunted at five places, mV/V (computed with 40 digits; a circuit
// simulator agrees to 4e-11).
TEST(TrueChannel, threeWireTable) {
  struct Row {
    double gauge_ohm, lead_ohm, shunt_ohm, strain, atTabs, senseToFar, dummyToFar;
  };
  const Row rows[] = {
      {120, 0, 59880, .499500500, -.500500501, -.500500501, -.500500501},
      {120, 1, 59880, .495376486, -.496360026, -.513000175, -.504632694},
      {120, 5, 59880, .479539642, -.480461243, -.562992619, -.520499680},
      {120, 10, 59880, .461112819, -.461964891, -.625469102, -.538959039},
      {120, 25, 59880, .413450937, -.414135837, -.812804802, -.586692435},
      {350, 1, 174650, .498078839, -.499073150, -.504786174, -.501924996},
      {350, 5, 174650, .492472210, -.493444241, -.521928131, -.507542648},
      {350, 25, 174650, .466231517, -.467102629, -.607620273, -.533831576},
  };
  for (const Row& row : rows) {
    SCOPED_TRACE(testing::Message() << row.gauge_ohm << " ohm, leads " << row.lead_ohm << " ohm");
    Exact one(CircuitKind::quarter_3_wire, row.gauge_ohm, row.lead_ohm);
    EXPECT_NEAR(one.mV_per_V(1000), row.strain, 5.1e-10);
    const auto step = [&](Terminal a, Terminal b, Side side) {
      one.shunt(row.shunt_ohm, a, b, side);
      return one.step_mV_per_V();
    };
    EXPECT_NEAR(step(Terminal::sig_plus, Terminal::exc_minus, Side::gauge), row.atTabs, 5.1e-10);
    EXPECT_NEAR(step(Terminal::exc_plus, Terminal::comp, Side::instrument), -row.atTabs, 5.1e-10);
    EXPECT_NEAR(step(Terminal::sig_plus, Terminal::exc_minus, Side::instrument), row.senseToFar, 5.1e-10);
    EXPECT_NEAR(step(Terminal::comp, Terminal::exc_minus, Side::instrument), row.dummyToFar, 5.1e-10);
    EXPECT_NEAR(step(Terminal::exc_plus, Terminal::sig_minus, Side::instrument), -.500500501, 5.1e-10);
    EXPECT_NEAR(step(Terminal::sig_minus, Terminal::exc_minus, Side::instrument), .500500501, 5.1e-10);
  }
}

// Leads of 6, 5 and 5 ohm on 350 ohm: +0.70323488 mV/V with the completion's lead the longer (computed with
// 40 digits).
TEST(TrueChannel, unequalLeadsUnbalanceTheBridge) {
  Exact one(CircuitKind::quarter_3_wire, 350, 5);
  one.channel.leads[Terminal::exc_minus].resistance = 6.0 * ohm;
  EXPECT_NEAR(one.mV_per_V(0), 0.70323488, 5e-9);
  one.channel.leads[Terminal::exc_minus].resistance = 5.0 * ohm;
  one.channel.leads[Terminal::comp].resistance = 6.0 * ohm;
  EXPECT_NEAR(one.mV_per_V(0), -0.70323488, 5e-9);
  one.channel.leads[Terminal::comp].resistance = 5.0 * ohm;
  one.channel.leads[Terminal::sig_plus].resistance = 6.0 * ohm;
  EXPECT_NEAR(one.mV_per_V(0), 0, 1e-9);
}

// A transducer is four arms of its output resistance behind half of what its input resistance is larger in
// each excitation wire: its sensitivity is at its own wires, so leads of L cost the part 2 L / (R_in + 2 L),
// and sensing at the gauge none of it.
TEST(TrueChannel, aTransducerAndItsSenseLeads) {
  Exact one(CircuitKind::transducer, 350, 2);
  one.channel.transducer.emplace();  // 380 ohm in, 350 ohm out, 2 mV/V
  EXPECT_NEAR(one.mV_per_V(0.5e6), 1.0 * 380 / 384, 1e-10);
  one.channel.sensed = true;
  for (const auto sense : {Terminal::sense_plus, Terminal::sense_minus})
    one.channel.leads[sense].resistance = 2.0 * ohm;
  EXPECT_NEAR(one.mV_per_V(0.5e6), 1.0, 1e-10);
}

// Across the amplifier's input the bridge is a source of about its own resistance.
TEST(TrueChannel, aFiniteInputResistanceLoadsTheBridge) {
  Exact one(CircuitKind::full_bending, 350);
  auto profile = std::make_shared<description::Profile>(*one.rack.devices[0].profile);
  profile->inputs->inputResistance = 350.0 * kiloohm;
  one.rack.devices[0].profile = profile;
  EXPECT_NEAR(one.mV_per_V(1000), 2.0 * 350e3 / (350e3 + 350), 1e-8);
}

TEST(TrueChannel, copperLeadsWarmBy0393PercentAKelvin) {
  Exact one(CircuitKind::quarter_3_wire, 120, 10);
  auto truth = one.build(one.none);
  const double p = 10.0 / 120 * (1 + 0.00393 * 25), x = 2e-3;
  EXPECT_NEAR(truth.ratio(1e-3, 25), x / (4 * (1 + p) + 2 * x), 1e-13);
}

TEST(TrueChannel, whatIsDrawnStaysInsideWhatIsStated) {
  Exact one(CircuitKind::quarter_3_wire, 120, 10);
  one.shunt(59880, Terminal::exc_plus, Terminal::comp, Side::instrument);
  one.rack.resistors["RC"].tolerance = 0.1 * percent;
  one.rack.resistors["RC"].temperatureCoefficient = 10.0 * ppm_per_kelvin;
  one.rack.resistors["RC"].temperatureSpan = 5.0 * kelvin;
  double lowest = 1e9, highest = 0, warmest = 0, coldest = 0, unbalance = 0;
  for (std::uint64_t seed = 1; seed <= 400; ++seed) {
    const Hall hall = Hall::drawn(Random(seed));
    const TrueChannel truth(one.rack, one.channel, Imperfections(), {}, Random(seed), Shared{hall, 0});
    EXPECT_NEAR(truth.gauge_ohm(), 120, 0.36 + 1e-12);
    EXPECT_NEAR(truth.gaugeFactor(), 2, 0.02 + 1e-12);
    EXPECT_NEAR(truth.shunts()[0].resistor_ohm / 59880, 1, 1.0501e-3);
    lowest = std::min(lowest, truth.gauge_ohm());
    highest = std::max(highest, truth.gauge_ohm());
    EXPECT_LT(truth.leadWarming_K(0), truth.leadWarming_K(1200)) << "leads warm up during the run";
    EXPECT_LE(std::abs(truth.leadWarming_K(0)), 5) << "the stated tolerance";
    warmest = std::max(warmest, truth.leadWarming_K(3600));
    coldest = std::min(coldest, truth.leadWarming_K(0));
    unbalance = std::max(unbalance, std::abs(truth.ratio(0, 0)));
  }
  // Rectangular: 400 draws come near both ends.
  EXPECT_LT(lowest, 119.68);
  EXPECT_GT(highest, 120.32);
  EXPECT_GT(warmest, 5);
  EXPECT_LE(warmest, 10);
  EXPECT_LT(coldest, -3);
  EXPECT_GT(unbalance, 0.5e-3) << "completions off nominal and unequal leads";
}

TEST(TrueChannel, gaugesOfAPacketShareTheirFactor) {
  Exact one(CircuitKind::quarter_3_wire, 120, 10);
  Imperfections shared = one.none;
  shared.gaugeFactors = 1;
  shared.batches = 1;
  const auto factor = [&](std::uint64_t seed, double batch) {
    return TrueChannel(one.rack, one.channel, shared, {}, Random(seed), Shared{{}, batch}).gaugeFactor();
  };
  EXPECT_EQ(factor(1, 0.5), factor(2, 0.5)) << "all of it is the packet's";
  EXPECT_NEAR(factor(1, 0.5), 2 * (1 + 0.5 * 0.01), 1e-12);
  shared.batches = 0.75;
  EXPECT_NE(factor(1, 0.5), factor(2, 0.5));
  EXPECT_NEAR(factor(1, 0.5), 2 * (1 + 0.75 * 0.5 * 0.01), 0.25 * 0.02 + 1e-12);
}

TEST(TrueChannel, anOpenRelayLeaks) {
  Exact one(CircuitKind::quarter_3_wire, 350, 0);
  one.shunt(174650, Terminal::sig_plus, Terminal::exc_minus, Side::instrument);
  auto leaky = std::make_shared<description::Profile>();
  leaky->relays.emplace();
  leaky->relays->leakage = 100.0 * megaohm;
  description::Device board;
  board.name = one.channel.shunts[0].relay.device;
  board.profile = leaky;
  one.rack.devices.push_back(board);
  // 100 Mohm across 350 ohm read as -1.75 microstrain at K = 2; up to a hundredth of that when it insulates better.
  const double strain = 4e6 / 2 * one.build(one.none).ratio(0, 0);
  EXPECT_LE(strain, -0.0175);
  EXPECT_GE(strain, -1.76);
}

TEST(TrueChannel, faultsOfACircuit) {
  Exact one(CircuitKind::quarter_3_wire, 120, 10);
  one.shunt(59880, Terminal::exc_plus, Terminal::comp, Side::instrument);
  ChannelFaults faults;
  faults.shuntScale = 1.1;
  EXPECT_NEAR(one.build(one.none, faults).shunts()[0].resistor_ohm, 1.1 * 59880, 1e-6);
  faults = {};
  faults.openLead = true;
  auto finite = std::make_shared<description::Profile>(*one.rack.devices[0].profile);
  finite->inputs->inputResistance = 1.0 * gigaohm;
  one.rack.devices[0].profile = finite;
  const auto broken = one.build(one.none, faults);
  // With the signal lead open half of what is left is divided away: the channel has lost its gauge.
  EXPECT_LT(std::abs(broken.ratio(1e-3, 0)), 0.6 * std::abs(one.build(one.none).ratio(1e-3, 0)));
}

}  // namespace
}  // namespace shuntwright::sim
