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
#include "tests/reference/bench.h"

// The bridge network against ngspice, a general-purpose circuit simulator (Debian package ngspice). The
// netlists are written here, wire by wire for each kind of bridge, with nothing taken from driver/bridge.
namespace shuntwright::bridge {
namespace {

using namespace reference;
using units::ohm;

constexpr double kAgreement_V_per_V = 1e-12;

// ---- netlist --------------------------------------------------------------------------------------

/// Writes one state; nodes carry the state's number. EXC+ is node p of the one source, EXC- is ground.
class Netlist {
 public:
  explicit Netlist(std::size_t firstState) : states_(firstState) {}

  std::string add(const Bench& bench, const Shunt* shunt) {
    suffix_ = std::to_string(states_++);
    parts_ = 0;
    for (const Part& part : partsOf(bench, shunt)) {
      if (part.isWire) {
        wire(part.from, part.to, part.r_ohm);
      } else {
        resistor(part.from, part.to, part.r_ohm);
      }
    }

    const std::string signal = "(v(" + node("s") + ")-v(" + node("m") + "))";
    const std::string excitation =
        bench.sensed ? "(v(" + node("sp") + ")-v(" + node("sn") + "))" : std::string("v(p)");
    const std::string result = "r" + suffix_;
    control_ << "let " << result << " = " << signal << "/" << excitation << "\nprint " << result << "\n";
    return result;
  }

  std::string circuit() const {
    return "bridge states\nvexc p 0 dc 1\n" + body_.str() + ".options gmin=1e-30\n.end\n";
  }
  std::string commands() const { return "op\n" + control_.str(); }

 private:
  std::string node(const std::string& name) const {
    return name == "p" || name == "0" ? name : name + '_' + suffix_;
  }

  std::ostream& part(char letter, const std::string& a, const std::string& b) {
    return body_ << letter << suffix_ << '_' << parts_++ << ' ' << node(a) << ' ' << node(b) << ' ';
  }
  void resistor(const std::string& a, const std::string& b, long double r) {
    part('r', a, b) << number(r) << '\n';
  }
  /// A lead, as a source of 0 V that senses its current and a source of r times that current. As plain
  /// resistors short leads would lose digits in ngspice's sums of conductances (6e-13 V/V off at 0.08 ohm,
  /// by exact rational arithmetic), and 0 ohm would be taken for a milliohm.
  void wire(const std::string& a, const std::string& b, long double r) {
    const std::string middle = "w" + std::to_string(parts_);
    const std::string sense = "v" + suffix_ + '_' + std::to_string(parts_);
    part('v', a, middle) << "dc 0\n";
    part('h', middle, b) << sense << ' ' << number(r) << '\n';
  }
  static std::string number(long double x) {
    char text[40];
    std::snprintf(text, sizeof text, "%.17g", static_cast<double>(x));
    return text;
  }

  std::ostringstream body_, control_;
  std::string suffix_;
  std::size_t states_;
  int parts_ = 0;
};

/// Runs ngspice once, on all netlists one after the other, in a folder of its own. Shape: name of each
/// printed vector to its value.
std::map<std::string, double> simulate(const std::vector<Netlist>& netlists) {
  std::string folder = (std::filesystem::temp_directory_path() / "shuntwright-ngspice-XXXXXX").string();
  if (!mkdtemp(folder.data())) {
    ADD_FAILURE() << "cannot make a temporary folder like " << folder;
    return {};
  }
  std::ofstream batch(folder + "/batch.cir");
  batch << "bridge circuits\n.control\nset numdgt=16\n";
  for (std::size_t i = 0; i < netlists.size(); ++i) {
    const std::string file = "states" + std::to_string(i) + ".cir";
    std::ofstream(folder + '/' + file) << netlists[i].circuit();
    batch << "source " << file << '\n' << netlists[i].commands() << "remcirc\n";
  }
  batch << "quit\n.endc\n.end\n";
  batch.close();
  std::map<std::string, double> values;
  std::string log;
  FILE* pipe = popen(("cd " + folder + " && ngspice -n -b batch.cir 2>errors").c_str(), "r");
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
  std::ifstream errors(folder + "/errors");  // apart: its progress would break lines in two
  log.append(std::istreambuf_iterator<char>(errors), {});
  std::filesystem::remove_all(folder);
  EXPECT_FALSE(values.empty()) << log;
  return values;
}

// ---- states ---------------------------------------------------------------------------------------

struct Case {
  Bench bench;
  std::vector<Shunt> shunts;
};

std::vector<Case> cases() {
  std::vector<Case> all;
  Random random(20240611);
  for (const auto& variant : kVariants) {
    for (int round = 0; round < 25; ++round) {
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
  std::vector<std::vector<std::string>> names;
  std::size_t states = 0;
  std::vector<Netlist> netlists;
  constexpr std::size_t kTogether = 8;  // cases a netlist: ngspice's time grows faster than the length
  for (std::size_t first = 0; first < all.size(); first += kTogether) {
    Netlist netlist(states);
    const std::size_t end = std::min(all.size(), first + kTogether);
    for (std::size_t i = first; i < end; ++i) {
      names.push_back({netlist.add(all[i].bench, nullptr)});
      for (const auto& shunt : all[i].shunts) names.back().push_back(netlist.add(all[i].bench, &shunt));
      states += names.back().size();
    }
    netlists.push_back(std::move(netlist));
  }
  ASSERT_GE(states, 2000u);
  const auto values = simulate(netlists);
  for (const auto& ofCase : names) {
    theirs.emplace_back();
    for (const auto& name : ofCase) {
      ASSERT_TRUE(values.contains(name)) << "ngspice did not print " << name;
      theirs.back().push_back(values.at(name));
    }
  }

  double worstRatio = 0, worstStep = 0;
  for (std::size_t i = 0; i < all.size(); ++i) {
    const Case& c = all[i];
    const Circuit ours = asCircuit(c.bench);
    const auto strain = static_cast<double>(c.bench.strain) * units::strain;
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
