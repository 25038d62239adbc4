// proves P-01
#include <gtest/gtest.h>

#include <cmath>
#include <cstdio>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <map>
#include <sstream>
#include <vector>

#include "driver/bridge/circuit.h"
#include "driver/bridge/shunt_step.h"
#include "driver/core/random.h"

// The bridge network against ngspice, a general-purpose circuit simulator (Debian package ngspice). The
// netlists are written here, wire by wire for each kind of bridge, with nothing taken from driver/bridge.
namespace shuntwright::bridge {
namespace {

using description::CircuitKind;
using description::Side;
using description::Terminal;
using units::ohm;

constexpr double kAgreement_V_per_V = 1e-12;

/// A bridge as the person at the bench would list it. Leads 0..6 in the order of Terminal.
struct Bench {
  CircuitKind kind = CircuitKind::quarter_3_wire;
  bool sensed = false;
  std::array<double, 4> arms_ohm{120, 120, 120, 120};
  std::array<double, 4> perStrain{};
  std::array<double, 7> leads_ohm{};
  double input_ohm = 1e9;
  double series_ohm = 0;
  double strain = 0;
};

struct Shunt {
  Terminal a, b;
  Side side;
  double r_ohm;
};

// ---- netlist --------------------------------------------------------------------------------------

/// Writes one state; nodes carry the state's number. EXC+ is node p of the one source, EXC- is ground.
class Netlist {
 public:
  std::string add(const Bench& bench, const Shunt* shunt) {
    suffix_ = std::to_string(states_++);
    parts_ = 0;
    std::array<double, 4> r{};
    for (std::size_t i = 0; i < 4; ++i) r[i] = bench.arms_ohm[i] * (1 + bench.perStrain[i] * bench.strain);
    const auto& lead = bench.leads_ohm;
    resistor("s", "m", bench.input_ohm);
    switch (bench.kind) {
      case CircuitKind::quarter_2_wire:  // gauge on two wires; everything else inside
        resistor("p", "s", r[1]);
        wire("s", "gs", lead[2]);
        resistor("gs", "gn", r[0]);
        wire("gn", "0", lead[1]);
        resistor("p", "m", r[2]);
        resistor("m", "0", r[3]);
        break;
      case CircuitKind::quarter_3_wire:  // completion, its wire, gauge, its wire; the signal wire carries
                                         // none
        resistor("p", "d", r[1]);
        wire("d", "gs", lead[4]);
        resistor("gs", "gn", r[0]);
        wire("gn", "0", lead[1]);
        wire("gs", "s", lead[2]);
        resistor("p", "m", r[2]);
        resistor("m", "0", r[3]);
        break;
      case CircuitKind::half_bending:
      case CircuitKind::half_poisson:  // two gauges on three wires
        wire("p", "gp", lead[0]);
        resistor("gp", "gs", r[1]);
        resistor("gs", "gn", r[0]);
        wire("gn", "0", lead[1]);
        wire("gs", "s", lead[2]);
        resistor("p", "m", r[2]);
        resistor("m", "0", r[3]);
        break;
      case CircuitKind::half_opposite:  // two gauges on two wires each
        resistor("p", "s", r[1]);
        wire("s", "gs", lead[2]);
        resistor("gs", "gn", r[0]);
        wire("gn", "0", lead[1]);
        wire("p", "gp", lead[0]);
        resistor("gp", "gm", r[2]);
        wire("gm", "m", lead[3]);
        resistor("m", "0", r[3]);
        break;
      default: {  // a full bridge at the far end of four or six wires
        const bool bought = bench.kind == CircuitKind::transducer;
        const std::string top = bought ? "ip" : "gp", bottom = bought ? "in" : "gn";
        if (bought) {
          wire("gp", "ip", bench.series_ohm);
          wire("gn", "in", bench.series_ohm);
        }
        wire("p", "gp", lead[0]);
        wire("gn", "0", lead[1]);
        resistor("gs", bottom, r[0]);
        resistor(top, "gs", r[1]);
        resistor(top, "gm", r[2]);
        resistor("gm", bottom, r[3]);
        wire("gs", "s", lead[2]);
        wire("gm", "m", lead[3]);
        if (bench.sensed) {
          wire("gp", "sp", lead[5]);
          wire("gn", "sn", lead[6]);
        }
      }
    }
    if (shunt)
      resistor(point(bench, shunt->a, shunt->side), point(bench, shunt->b, shunt->side), shunt->r_ohm);

    const std::string signal = "(v(" + node("s") + ")-v(" + node("m") + "))";
    const std::string excitation =
        bench.sensed ? "(v(" + node("sp") + ")-v(" + node("sn") + "))" : std::string("v(p)");
    const std::string result = "r" + suffix_;
    control_ << "let " << result << " = " << signal << "/" << excitation << "\nprint " << result << "\n";
    return result;
  }

  std::string text() const {
    return "bridge states\nvexc p 0 dc 1\n" + body_.str() +
           ".options gmin=1e-30\n.control\nset numdgt=16\nop\n" + control_.str() + "quit\n.endc\n.end\n";
  }

 private:
  std::string node(const std::string& name) const {
    return name == "p" || name == "0" ? name : name + '_' + suffix_;
  }

  /// The name in the netlist of a terminal on one side.
  static std::string point(const Bench& bench, Terminal t, Side side) {
    const bool far = side == Side::gauge;
    switch (t) {
      case Terminal::exc_plus:
        return far ? "gp" : "p";
      case Terminal::exc_minus:
        return far ? "gn" : "0";
      case Terminal::sig_plus:
        return far ? "gs" : "s";
      case Terminal::sig_minus:
        return far ? "gm" : "m";
      case Terminal::comp:
        return far ? "gs" : "d";
      case Terminal::sense_plus:
        return far ? "gp" : "sp";
      case Terminal::sense_minus:
        return far ? "gn" : "sn";
    }
    ADD_FAILURE() << "no such terminal in circuit " << description::name(bench.kind);
    return "0";
  }

  std::ostream& part(char letter, const std::string& a, const std::string& b) {
    return body_ << letter << suffix_ << '_' << parts_++ << ' ' << node(a) << ' ' << node(b) << ' ';
  }
  void resistor(const std::string& a, const std::string& b, double r) {
    part('r', a, b) << number(r) << '\n';
  }
  /// A lead, as a source of 0 V that senses its current and a source of r times that current. As plain
  /// resistors short leads would lose digits in ngspice's sums of conductances (6e-13 V/V off at 0.08 ohm,
  /// by exact rational arithmetic), and 0 ohm would be taken for a milliohm.
  void wire(const std::string& a, const std::string& b, double r) {
    const std::string middle = "w" + std::to_string(parts_);
    const std::string sense = "v" + suffix_ + '_' + std::to_string(parts_);
    part('v', a, middle) << "dc 0\n";
    part('h', middle, b) << sense << ' ' << number(r) << '\n';
  }
  static std::string number(double x) {
    char text[40];
    std::snprintf(text, sizeof text, "%.17g", x);
    return text;
  }

  std::ostringstream body_, control_;
  std::string suffix_;
  int states_ = 0;
  int parts_ = 0;
};

/// Runs ngspice on the netlist in a folder of its own. Shape: name of each printed vector to its value.
std::map<std::string, double> simulate(const Netlist& netlist) {
  std::string folder = (std::filesystem::temp_directory_path() / "shuntwright-ngspice-XXXXXX").string();
  if (!mkdtemp(folder.data())) {
    ADD_FAILURE() << "cannot make a temporary folder like " << folder;
    return {};
  }
  std::ofstream(folder + "/states.cir") << netlist.text();
  std::map<std::string, double> values;
  std::string log;
  FILE* pipe = popen(("cd " + folder + " && ngspice -n -b states.cir 2>&1").c_str(), "r");
  if (pipe) {
    char line[1024];
    while (std::fgets(line, sizeof line, pipe)) {
      char name[64];
      double value = 0;
      if (std::sscanf(line, "%63s = %lf", name, &value) == 2) {
        values[name] = value;
      } else {
        log += line;
      }
    }
    const int status = pclose(pipe);
    EXPECT_TRUE(WIFEXITED(status) && WEXITSTATUS(status) != 127)
        << "ngspice cannot be run; install the Debian package ngspice (tools/setup does)\n"
        << log;
  } else {
    ADD_FAILURE() << "cannot start a shell for ngspice";
  }
  std::filesystem::remove_all(folder);
  EXPECT_FALSE(values.empty()) << log;
  return values;
}

// ---- states ---------------------------------------------------------------------------------------

/// Strain factor of each arm at K = 2, nu = 0.3; of a transducer of 2 mV/V: at its terminals, rated value 1.
std::array<double, 4> perStrain(CircuitKind kind) {
  switch (kind) {
    case CircuitKind::quarter_2_wire:
    case CircuitKind::quarter_3_wire:
      return {2, 0, 0, 0};
    case CircuitKind::half_bending:
      return {2, -2, 0, 0};
    case CircuitKind::half_poisson:
      return {2, -0.6, 0, 0};
    case CircuitKind::half_opposite:
      return {2, 0, 2, 0};
    case CircuitKind::full_poisson:
      return {2, -0.6, 2, -0.6};
    case CircuitKind::full_bending_poisson:
      return {2, -0.6, 0.6, -2};
    case CircuitKind::full_bending:
    case CircuitKind::full_shear:
      return {2, -2, 2, -2};
    case CircuitKind::transducer:
      return {2e-3, -2e-3, 2e-3, -2e-3};
  }
  return {};
}

/// Terminals one can reach with a clip, on one side.
std::vector<Terminal> reachable(CircuitKind kind, bool sensed, Side side) {
  using enum Terminal;
  std::vector<Terminal> list = {exc_plus, exc_minus, sig_plus, sig_minus};
  if (side == Side::gauge) {
    if (kind == CircuitKind::quarter_2_wire || kind == CircuitKind::quarter_3_wire)
      return {sig_plus, exc_minus};
    if (kind == CircuitKind::half_bending || kind == CircuitKind::half_poisson) {
      return {exc_plus, exc_minus, sig_plus};
    }
    return list;
  }
  if (kind == CircuitKind::quarter_3_wire) list.push_back(comp);
  if (sensed) list.insert(list.end(), {sense_plus, sense_minus});
  return list;
}

Circuit asCircuit(const Bench& bench) {
  Circuit c;
  c.kind = bench.kind;
  c.sensed = bench.sensed;
  for (std::size_t i = 0; i < 4; ++i) c.arms[i] = {bench.arms_ohm[i] * ohm, bench.perStrain[i]};
  for (std::size_t i = 0; i < 7; ++i) c.leads[i] = bench.leads_ohm[i] * ohm;
  c.inputResistance = bench.input_ohm * ohm;
  c.excitationSeries = bench.series_ohm * ohm;
  return c;
}

struct Variant {
  CircuitKind kind;
  bool sensed;
};
constexpr Variant kVariants[] = {{CircuitKind::quarter_2_wire, false},
                                 {CircuitKind::quarter_3_wire, false},
                                 {CircuitKind::half_bending, false},
                                 {CircuitKind::half_poisson, false},
                                 {CircuitKind::half_opposite, false},
                                 {CircuitKind::full_bending, false},
                                 {CircuitKind::full_bending, true},
                                 {CircuitKind::full_poisson, false},
                                 {CircuitKind::full_bending_poisson, true},
                                 {CircuitKind::full_bending_poisson, false},
                                 {CircuitKind::full_shear, false},
                                 {CircuitKind::transducer, false},
                                 {CircuitKind::transducer, true}};

Bench drawnBench(const Variant& variant, Random& random) {
  Bench bench;
  bench.kind = variant.kind;
  bench.sensed = variant.sensed;
  bench.perStrain = perStrain(variant.kind);
  const double nominal[] = {120, 350, 1000};
  const double gauge = nominal[random.below(3)];
  for (double& arm : bench.arms_ohm) arm = gauge * random.uniform(0.995, 1.005);
  for (double& lead : bench.leads_ohm) lead = random.below(4) == 0 ? 0 : random.uniform(0, 25);
  const double inputs[] = {1e5, 1e7, 1e9};
  bench.input_ohm = inputs[random.below(3)];
  const bool transducer = variant.kind == CircuitKind::transducer;
  bench.series_ohm = transducer && random.below(3) != 0 ? random.uniform(0, 30) : 0;
  bench.strain = random.uniform(-1, 1) * (transducer ? 1.2 : 0.01);
  return bench;
}

Shunt drawnShunt(const Bench& bench, Side side, Random& random) {
  const auto list = reachable(bench.kind, bench.sensed, side);
  const auto a = random.below(list.size());
  const auto b = (a + 1 + random.below(list.size() - 1)) % list.size();
  return {list[a], list[b], side, random.uniform(5e3, 1e6)};
}

struct Case {
  Bench bench;
  std::vector<Shunt> shunts;
};

std::vector<Case> cases() {
  std::vector<Case> all;
  Random random(20240611);
  for (const auto& variant : kVariants) {
    for (int round = 0; round < 6; ++round) {
      const Bench bench = drawnBench(variant, random);
      Case c{bench, {}};
      for (Side side : {Side::instrument, Side::instrument, Side::gauge, Side::gauge}) {
        c.shunts.push_back(drawnShunt(bench, side, random));
      }
      all.push_back(c);
    }
  }
  // Every shunt position of the three-wire quarter bridge: tabs, completion, sense lead, completion terminal,
  // half bridge above and below.
  using enum Terminal;
  for (double gauge : {120.0, 350.0, 1000.0}) {
    for (double longest : {0.0, 1.0, 10.0, 25.0}) {
      for (double strain : {-0.002, 0.0, 0.001}) {
        Bench bench = drawnBench({CircuitKind::quarter_3_wire, false}, random);
        bench.arms_ohm = {gauge, gauge, 1000, 1000};
        bench.strain = strain;
        bench.input_ohm = 1e9;
        for (double& lead : bench.leads_ohm) lead = longest * random.uniform(0.9, 1);
        const double shunt = gauge * 499;
        all.push_back({bench,
                       {{sig_plus, exc_minus, Side::gauge, shunt},
                        {exc_plus, comp, Side::instrument, shunt},
                        {sig_plus, exc_minus, Side::instrument, shunt},
                        {comp, exc_minus, Side::instrument, shunt},
                        {exc_plus, sig_minus, Side::instrument, shunt},
                        {sig_minus, exc_minus, Side::instrument, shunt}}});
      }
    }
  }
  return all;
}

std::string words(const Case& c, const Shunt* shunt) {
  std::ostringstream out;
  out << description::name(c.bench.kind) << (c.bench.sensed ? ", sensed" : "") << ", strain "
      << c.bench.strain;
  if (shunt) {
    out << ", " << shunt->r_ohm << " ohm from " << description::name(shunt->a) << " to "
        << description::name(shunt->b) << " at the " << description::name(shunt->side);
  }
  return out.str();
}

TEST(Ngspice, AgreesOnEveryCircuitAndShunt) {
  const auto all = cases();
  std::vector<std::vector<double>> theirs;  // of each case: no shunt, then each shunt
  std::size_t states = 0;
  constexpr std::size_t kBatch = 20;  // cases a netlist: ngspice's time grows faster than the length
  for (std::size_t first = 0; first < all.size(); first += kBatch) {
    Netlist netlist;
    std::vector<std::vector<std::string>> names;
    const std::size_t end = std::min(all.size(), first + kBatch);
    for (std::size_t i = first; i < end; ++i) {
      names.push_back({netlist.add(all[i].bench, nullptr)});
      for (const auto& shunt : all[i].shunts) names.back().push_back(netlist.add(all[i].bench, &shunt));
    }
    const auto values = simulate(netlist);
    for (const auto& ofCase : names) {
      theirs.emplace_back();
      for (const auto& name : ofCase) {
        ASSERT_TRUE(values.contains(name)) << "ngspice did not print " << name;
        theirs.back().push_back(values.at(name));
      }
      states += ofCase.size();
    }
  }
  ASSERT_GE(states, 200u);

  double worstRatio = 0, worstStep = 0;
  for (std::size_t i = 0; i < all.size(); ++i) {
    const Case& c = all[i];
    const Circuit ours = asCircuit(c.bench);
    const auto strain = c.bench.strain * units::strain;
    const auto before = ratio(ours, strain);
    ASSERT_TRUE(before) << before.error().text();
    const double theirBefore = theirs[i][0];
    const double ratioOff = std::abs(before->in(units::volt_per_volt)-theirBefore);
    EXPECT_LE(ratioOff, kAgreement_V_per_V) << words(c, nullptr);
    worstRatio = std::max(worstRatio, ratioOff);
    for (std::size_t k = 0; k < c.shunts.size(); ++k) {
      const Shunt& shunt = c.shunts[k];
      const ShuntPath path{{shunt.a, shunt.b}, shunt.side, shunt.r_ohm * ohm};
      const auto after = ratio(ours, strain, {&path, 1});
      const auto step = stepOf(ours, strain, path);
      ASSERT_TRUE(after && step) << words(c, &shunt);
      const double theirAfter = theirs[i][k + 1];
      const double afterOff = std::abs(after->in(units::volt_per_volt)-theirAfter);
      const double stepOff = std::abs(step->in(units::volt_per_volt) - (theirAfter - theirBefore));
      EXPECT_LE(afterOff, kAgreement_V_per_V) << words(c, &shunt);
      EXPECT_LE(stepOff, kAgreement_V_per_V) << words(c, &shunt);
      worstRatio = std::max(worstRatio, afterOff);
      worstStep = std::max(worstStep, stepOff);
    }
  }
  std::printf("%zu circuit states: worst ratio off %.2g V/V, worst step off %.2g V/V\n", states, worstRatio,
              worstStep);
}

// The bound must be able to see a relay's contact: 0.1 ohm in 174 650.
TEST(Ngspice, BoundWouldShowAContactResistance) {
  Bench bench;
  bench.arms_ohm = {350, 350, 350, 350};
  const Circuit c = asCircuit(bench);
  const auto stepAt = [&](double r) {
    return stepOf(c, {}, {{Terminal::exc_plus, Terminal::comp}, Side::instrument, r * ohm}).value();
  };
  EXPECT_GT(std::abs((stepAt(174650.1) - stepAt(174650)).in(units::volt_per_volt)), 100 * kAgreement_V_per_V);
}

}  // namespace
}  // namespace shuntwright::bridge
