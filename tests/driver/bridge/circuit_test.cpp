#include "driver/bridge/circuit.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <functional>

#include "tests/driver/bridge/circuits.h"

namespace shuntwright::bridge {
namespace {

using namespace test;
using testing::HasSubstr;

constexpr double kStrains[] = {-0.01, -0.005, -0.001, -1e-6, 0, 1e-6, 0.001, 0.005, 0.01};  // m/m
constexpr double kRounding = 4e-16;                                                         // V/V

// Closed forms of the four-arm equation r = (R1 R3 - R2 R4)/((R1 + R2)(R3 + R4)); x = K strain,
// p = R_L/R, the leads by Ohm's law (computed; each checked against the four-arm equation).
struct ClosedForm {
  CircuitKind kind;
  std::function<double(double x, double p)> ratio;
};
constexpr double kNu = 0.3;
const ClosedForm kClosedForms[] = {
    {CircuitKind::quarter_2_wire, [](double x, double p) { return (x + 2 * p) / (2 * (2 + x + 2 * p)); }},
    {CircuitKind::quarter_3_wire, [](double x, double p) { return x / (4 * (1 + p) + 2 * x); }},
    {CircuitKind::half_bending, [](double x, double p) { return x / (2 * (1 + p)); }},
    {CircuitKind::half_poisson,
     [](double x, double p) { return x * (1 + kNu) / (4 * (1 + p) + 2 * x * (1 - kNu)); }},
    {CircuitKind::half_opposite, [](double x, double p) { return (x + 2 * p) / (2 + x + 2 * p); }},
    {CircuitKind::full_bending, [](double x, double p) { return x / (1 + 2 * p); }},
    {CircuitKind::full_shear, [](double x, double p) { return x / (1 + 2 * p); }},
    // The bridge's own resistance, R (1 + x (1 - nu)/2), in series with two excitation leads.
    {CircuitKind::full_poisson,
     [](double x, double p) {
       const double own = 1 + x * (1 - kNu) / 2;
       return x * (1 + kNu) / (2 * own) * own / (own + 2 * p);
     }},
    {CircuitKind::full_bending_poisson,
     [](double x, double p) {
       const double left = 2 + x * (1 - kNu), right = 2 - x * (1 - kNu);
       const double own = left * right / 4;
       return x * (1 + kNu) / 2 / own * own / (own + 2 * p);
     }},
};

TEST(Circuit, RatioIsTheClosedFormOfEveryCircuit) {
  for (const auto& form : kClosedForms) {
    for (double R : {120.0, 350.0, 1000.0}) {
      for (double lead : {0.0, 1.0, 5.0, 10.0, 25.0}) {
        for (double e : kStrains) {
          EXPECT_NEAR(ratioAt(circuit(form.kind, R, lead), e), form.ratio(2 * e, lead / R), kRounding)
              << description::name(form.kind) << ", R " << R << ", lead " << lead << ", strain " << e;
        }
      }
    }
  }
}

// Section 2's printed table (computed): K = 2, nu = 0.3.
TEST(Circuit, RatioIsThePrintedValue) {
  struct Row {
    double strain_microstrain, quarter, opposite, halfPoisson, fullPoisson;  // mV/V
  };
  for (const Row& row : {Row{+1000, 0.499500499500, 0.999000999001, 0.649545318277, 1.29909063655},
                         Row{+5000, 2.48756218905, 4.97512437811, 3.23866467364, 6.47732934728},
                         Row{+10000, 4.95049504950, 9.90099009901, 6.45481628600, 12.9096325720},
                         Row{-1000, -0.500500500501, -1.00100100100, -0.650455318723, -1.30091063745},
                         Row{-5000, -2.51256281407, -5.02512562814, -3.26141495233, -6.52282990467}}) {
    const double e = row.strain_microstrain;
    EXPECT_NEAR(millivolts(circuit(CircuitKind::quarter_3_wire), e), row.quarter, 6e-12);
    EXPECT_NEAR(millivolts(circuit(CircuitKind::quarter_2_wire), e), row.quarter, 6e-12);
    EXPECT_NEAR(millivolts(circuit(CircuitKind::half_opposite), e), row.opposite, 6e-12);
    EXPECT_NEAR(millivolts(circuit(CircuitKind::half_poisson), e), row.halfPoisson, 6e-12);
    EXPECT_NEAR(millivolts(circuit(CircuitKind::full_poisson), e), row.fullPoisson, 6e-11);
  }
}

TEST(Circuit, TensionInArms1And3RaisesTheRatio) {
  for (std::size_t arm = 0; arm < 4; ++arm) {
    Circuit c = circuit(CircuitKind::full_bending);
    for (auto& a : c.arms) a.relativePerStrain = 0;
    c.arms[arm].relativePerStrain = 2;
    EXPECT_EQ(ratioAt(c, 1e-3) > 0, arm % 2 == 0) << "arm " << arm + 1;
  }
}

TEST(Circuit, SensedExcitationHidesItsLeads) {
  Circuit c = circuit(CircuitKind::full_bending, 350);
  c.sensed = true;
  c.lead(Terminal::exc_plus) = 10.0 * ohm;
  c.lead(Terminal::exc_minus) = 3.0 * ohm;
  c.lead(Terminal::sense_plus) = 7.0 * ohm;
  EXPECT_NEAR(ratioAt(c, 1e-3), 2e-3, kRounding);
  c.sensed = false;
  EXPECT_NEAR(ratioAt(c, 1e-3), 2e-3 * 350 / 363, kRounding);
}

// An input of R_i loads the bridge's output resistance R (1 - (x/2)^2)... at balance R: divides by 1 + R/R_i.
TEST(Circuit, FiniteInputResistanceLoadsTheBridge) {
  Circuit c = circuit(CircuitKind::full_bending, 350, 0);
  c.inputResistance = 1e5 * ohm;
  const double x = 2e-3;
  const double source = 2 * 350 * (1 + x) * (1 - x) / 2;  // (1+x) || (1-x), twice
  EXPECT_NEAR(ratioAt(c, 1e-3), x * 1e5 / (1e5 + source), kRounding);
}

TEST(Circuit, SeveralShuntsStandTogether) {
  const Circuit c = circuit(CircuitKind::quarter_3_wire);
  const ShuntPath both[] = {acrossTabs(2 * 59880), acrossTabs(2 * 59880)};
  EXPECT_NEAR(millivolts(c, 0, both), -0.500500500501, 1e-12);
}

std::string errorOf(const Circuit& c, double strain = 0, std::span<const ShuntPath> shunts = {}) {
  const auto r = ratio(c, strain * units::strain, shunts);
  if (r) return "no error";
  EXPECT_EQ(r.error().code, ErrorCode::bad_use);
  return r.error().text();
}

TEST(CircuitErrors, NameTerminalAndCircuit) {
  const Circuit half = circuit(CircuitKind::half_bending);
  const ShuntPath comp = path(Terminal::exc_plus, Terminal::comp, Side::instrument, 1e5);
  EXPECT_FALSE(exists(half, comp));
  EXPECT_THAT(errorOf(half, 0, {&comp, 1}),
              HasSubstr("a half bending circuit has no COMP at the instrument"));
  EXPECT_THAT(errorOf(half, 0, {&comp, 1}), HasSubstr("EXC+, EXC-, SIG+, SIG-"));

  const Circuit quarter = circuit(CircuitKind::quarter_3_wire);
  const ShuntPath far = path(Terminal::exc_plus, Terminal::sig_plus, Side::gauge, 1e5);
  EXPECT_THAT(errorOf(quarter, 0, {&far, 1}), HasSubstr("a quarter 3-wire circuit has no EXC+ at the gauge"));
  const ShuntPath joined = path(Terminal::comp, Terminal::sig_plus, Side::gauge, 1e5);
  EXPECT_FALSE(exists(quarter, joined));
  EXPECT_THAT(errorOf(quarter, 0, {&joined, 1}), HasSubstr("both ends at one point"));
}

TEST(CircuitErrors, NameTheImpossibleResistance) {
  Circuit c = circuit(CircuitKind::quarter_3_wire);
  c.lead(Terminal::comp) = -1.0 * ohm;
  EXPECT_THAT(errorOf(c), HasSubstr("the COMP lead has -1 ohm"));
  c.lead(Terminal::comp) = std::nan("") * ohm;
  EXPECT_THAT(errorOf(c), HasSubstr("the COMP lead has nan ohm"));

  c = circuit(CircuitKind::quarter_3_wire);
  EXPECT_THAT(errorOf(c, -0.6), HasSubstr("arm 1 of the quarter 3-wire circuit has -24"));
  c.arms[2].resistance = {};
  EXPECT_THAT(errorOf(c), HasSubstr("arm 3"));

  c = circuit(CircuitKind::quarter_3_wire);
  c.inputResistance = {};
  EXPECT_THAT(errorOf(c), HasSubstr("input resistance is 0 ohm"));

  c = circuit(CircuitKind::transducer, 350);
  c.excitationSeries = -5.0 * ohm;
  EXPECT_THAT(errorOf(c), HasSubstr("transducer's excitation lines is -5 ohm"));

  c = circuit(CircuitKind::quarter_3_wire);
  const ShuntPath negative = acrossTabs(-1);
  EXPECT_THAT(errorOf(c, 0, {&negative, 1}), HasSubstr("a shunt has -1 ohm"));

  c.sensed = true;
  EXPECT_THAT(errorOf(c), HasSubstr("a quarter 3-wire circuit has no sense leads"));
  EXPECT_FALSE(exists(c, acrossTabs(1e5)));

  c = circuit(CircuitKind::quarter_3_wire);
  c.arms[2].resistance = c.arms[3].resistance = kInfinite * ohm;
  EXPECT_THAT(errorOf(c), HasSubstr("connected to nothing"));
}

// ---- from the description -------------------------------------------------------------------------

struct Bench {
  description::Rack rack;
  description::Channel channel;

  Bench() {
    auto amplifier = std::make_shared<description::Profile>();
    amplifier->inputs.emplace();
    amplifier->inputs->inputResistance = 2.0 * units::gigaohm;
    for (double r : {120.0, 350.0}) amplifier->inputs->completions.push_back({r * ohm, {}});
    amplifier->inputs->halfBridge = {1000.0 * ohm, {}};
    auto relays = std::make_shared<description::Profile>();
    relays->relays.emplace();
    relays->relays->contactResistance = 0.25 * ohm;
    description::Device amp, board;
    amp.name = "amp1";
    amp.profile = amplifier;
    board.name = "relays";
    board.profile = relays;
    rack.devices = {amp, board};

    description::GaugeSheet sheet;
    sheet.name = "G";
    sheet.factor = units::GaugeFactor(2.08);
    sheet.resistance = {350.0 * ohm, {}};
    rack.gauges["G"] = sheet;
    description::Resistor resistor;
    resistor.name = "R100k";
    resistor.value = 100e3 * ohm;
    rack.resistors["R100k"] = resistor;

    channel.name = "S01";
    channel.device = "amp1";
    channel.gauge = "G";
  }

  void leads(double first_ohm) {
    for (Terminal t : description::leadsOf(channel.circuit, channel.sensed)) {
      channel.leads[t].resistance = first_ohm * ohm;
      first_ohm += 1;
    }
  }
};

TEST(CircuitOf, QuarterBridgeTakesCompletionAndHalfBridgeFromTheProfile) {
  Bench bench;
  bench.leads(3);
  const Circuit c = circuitOf(bench.rack, bench.channel);
  EXPECT_EQ(c.kind, CircuitKind::quarter_3_wire);
  EXPECT_EQ(c.arms[0].resistance, 350.0 * ohm);
  EXPECT_EQ(c.arms[0].relativePerStrain, 2.08);
  EXPECT_EQ(c.arms[1].resistance, 350.0 * ohm);
  EXPECT_EQ(c.arms[1].relativePerStrain, 0);
  EXPECT_EQ(c.arms[2].resistance, 1000.0 * ohm);
  EXPECT_EQ(c.arms[3].resistance, 1000.0 * ohm);
  EXPECT_EQ(c.inputResistance, 2.0 * units::gigaohm);
  EXPECT_EQ(c.lead(Terminal::exc_minus), 3.0 * ohm);
  EXPECT_EQ(c.lead(Terminal::sig_plus), 5.0 * ohm);
}

TEST(CircuitOf, TakesTheMeasuredGaugeAndTheNamedCompletion) {
  Bench bench;
  bench.channel.measuredResistance = description::Toleranced{350.9 * ohm, {}};
  bench.channel.completion = 120.0 * ohm;
  const Circuit c = circuitOf(bench.rack, bench.channel);
  EXPECT_EQ(c.arms[0].resistance, 350.9 * ohm);
  EXPECT_EQ(c.arms[1].resistance, 120.0 * ohm);
}

TEST(CircuitOf, PutsGaugesCompletionsAndHalfBridgeInTheirArms) {
  using Arms = std::array<double, 4>;
  const std::pair<CircuitKind, Arms> expected[] = {{CircuitKind::half_bending, {351, 351, 1000, 1000}},
                                                   {CircuitKind::half_poisson, {351, 351, 1000, 1000}},
                                                   {CircuitKind::half_opposite, {351, 350, 351, 350}},
                                                   {CircuitKind::full_poisson, {351, 351, 351, 351}},
                                                   {CircuitKind::quarter_2_wire, {351, 350, 1000, 1000}}};
  for (const auto& [kind, arms] : expected) {
    for (double poisson : {0.0, 0.3}) {
      Bench bench;
      bench.channel.circuit = kind;
      bench.channel.poisson = poisson;
      bench.channel.measuredResistance = description::Toleranced{351.0 * ohm, {}};
      const Circuit c = circuitOf(bench.rack, bench.channel);
      for (std::size_t i = 0; i < 4; ++i) {
        EXPECT_EQ(c.arms[i].resistance, arms[i] * ohm) << description::name(kind) << " arm " << i + 1;
        EXPECT_EQ(c.arms[i].relativePerStrain, 2.08 * description::armWeights(kind, poisson)[i]);
      }
    }
  }
}

TEST(CircuitOf, GivesEachGaugeItsOwnResistanceAndFactor) {
  Bench bench;
  bench.channel.circuit = CircuitKind::full_bending;
  bench.channel.measuredResistance = description::Toleranced{351.0 * ohm, {}};
  bench.channel.arms[1] = description::ArmGauge{description::Toleranced{349.2 * ohm, {}}, {}, {}};
  bench.channel.arms[3] = description::ArmGauge{{}, units::GaugeFactor(2.02), {}};
  const Circuit c = circuitOf(bench.rack, bench.channel);
  const double resistances[] = {351, 349.2, 351, 351}, factors[] = {2.08, -2.08, 2.08, -2.02};
  for (std::size_t i = 0; i < 4; ++i) {
    EXPECT_EQ(c.arms[i].resistance, resistances[i] * ohm);
    EXPECT_EQ(c.arms[i].relativePerStrain, factors[i]);
  }
}

// A resistor R_c across one arm of four of R: step R / (4 R_c + 2 R), so R = 4 R_c s / (1 - 2 s) (Ohm's law).
TEST(CircuitOf, TransducerTakesItsArmsFromTheCertificatesShunt) {
  Bench bench;
  bench.channel.circuit = CircuitKind::transducer;
  description::TransducerSheet sheet;
  sheet.inputResistance = sheet.outputResistance = 350.0 * ohm;
  sheet.certificateShunt = {
      100e3 * ohm, {Terminal::sig_minus, Terminal::exc_minus}, 0.88 * millivolt_per_volt, {}};
  const auto arm = armOf(sheet);
  ASSERT_TRUE(arm) << arm.error().text();
  EXPECT_NEAR(arm->in(ohm), 4 * 100e3 * 0.88e-3 / (1 - 2 * 0.88e-3), 1e-9);

  sheet.inputResistance = 400.0 * ohm;  // now the resistor reaches over the compensation in EXC- as well
  bench.channel.transducer = sheet;
  const Circuit c = circuitOf(bench.rack, bench.channel);
  const ShuntPath shunt = path(Terminal::sig_minus, Terminal::exc_minus, Side::gauge, 100e3);
  Circuit unloaded = c;
  unloaded.inputResistance = kInfinite * ohm;
  EXPECT_NEAR(millivolts(unloaded, 0, {&shunt, 1}), 0.88, 1e-12);
  EXPECT_NEAR(ratioAt(unloaded, 1), 2e-3, 1e-15) << "the sensitivity is the certificate's, whatever the arms";

  sheet.certificateShunt->step = 8.8 * millivolt_per_volt;
  const auto none = armOf(sheet);
  ASSERT_FALSE(none);
  EXPECT_THAT(none.error().text(), HasSubstr("cannot give 8.8 mV/V on a transducer of 350 ohm"));
}

// A data sheet's input resistance, output resistance and sensitivity must come back out of the network.
TEST(CircuitOf, TransducerGivesItsDataSheetBack) {
  Bench bench;
  bench.channel.circuit = CircuitKind::transducer;
  bench.channel.gauge.clear();
  bench.channel.transducer.emplace();
  bench.channel.transducer->inputResistance = 385.0 * ohm;
  bench.channel.transducer->outputResistance = 350.0 * ohm;
  bench.channel.transducer->sensitivity = 2.0012 * millivolt_per_volt;
  Circuit c = circuitOf(bench.rack, bench.channel);
  c.inputResistance = kInfinite * ohm;
  EXPECT_NEAR(ratioAt(c, 1), 2.0012e-3, kRounding);
  EXPECT_NEAR(ratioAt(c, -0.5), -1.0006e-3, kRounding);

  Circuit loaded = c;  // 1 ohm in each excitation lead: the sheet's input resistance divides
  loaded.lead(Terminal::exc_plus) = loaded.lead(Terminal::exc_minus) = 1.0 * ohm;
  EXPECT_NEAR(ratioAt(loaded, 1), 2.0012e-3 * 385 / 387, kRounding);

  loaded = c;  // an input equal to the output resistance halves the signal (x^2 = 5e-6 aside)
  loaded.inputResistance = 350.0 * ohm;
  EXPECT_NEAR(ratioAt(loaded, 1), 2.0012e-3 / 2, 1e-8);
}

TEST(PathOf, AddsTheRelaysContactResistance) {
  Bench bench;
  description::Shunt shunt;
  shunt.resistor = "R100k";
  shunt.relay = {"relays", 4};
  shunt.across = {Terminal::exc_plus, Terminal::comp};
  shunt.side = Side::instrument;
  const ShuntPath p = pathOf(bench.rack, shunt);
  EXPECT_EQ(p.resistance, 100000.25 * ohm);
  EXPECT_EQ(p.across, shunt.across);
  EXPECT_EQ(p.side, Side::instrument);
}

// An open relay of insulation R_i leaves R_C + R_i across the arm. The step from there, by the network with
// that path in it, is the step of a resistor larger by R_C^2 / R_i from the bridge without (parallel
// conductances add).
TEST(LeakEquivalent, isTheStepThatTheLeakLeaves) {
  Circuit circuit;
  circuit.kind = CircuitKind::quarter_3_wire;
  for (auto& arm : circuit.arms) arm.resistance = 350.0 * ohm;
  const double shunt_ohm = 174650, leak_ohm = 20e6;
  const auto at = [&](double resistance_ohm) {
    const ShuntPath path{{Terminal::sig_plus, Terminal::exc_minus}, Side::gauge, resistance_ohm * ohm};
    return ratio(circuit, {}, {&path, 1})->in(volt_per_volt);
  };
  const double step = at(shunt_ohm) - at(shunt_ohm + leak_ohm);
  const double without = at(shunt_ohm) - ratio(circuit, {})->in(volt_per_volt);
  const double equivalent = leakEquivalent(shunt_ohm * ohm, leak_ohm * ohm).in(ohm);
  const double predicted = at(shunt_ohm + equivalent) - ratio(circuit, {})->in(volt_per_volt);
  ASSERT_GT(std::abs(step / without - 1), 0.008);  // 0.9 %: worth counting
  EXPECT_NEAR(predicted / step, 1, 3e-4);
}

}  // namespace
}  // namespace shuntwright::bridge
