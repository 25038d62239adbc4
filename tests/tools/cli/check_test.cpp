// proves P-03
// `shuntwright check` as a person or a script runs it.
#include <gtest/gtest.h>

#include <boost/json/parse.hpp>
#include <boost/json/value.hpp>
#include <cmath>
#include <cstdio>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <map>
#include <sstream>

#include "tests/support/run_program.h"

namespace {

namespace json = boost::json;

using shuntwright::test::Ran;

Ran run(const std::string& arguments) { return shuntwright::test::runShuntwright(arguments); }

const std::string kRacks = std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles/racks/";

class Check : public ::testing::Test {
 protected:
  void SetUp() override {
    char pattern[] = "/tmp/shuntwright-check-XXXXXX";
    folder_ = ::mkdtemp(pattern);
  }
  void TearDown() override { std::filesystem::remove_all(folder_); }

  /// A shipped rack with some text replaced, its profile paths made absolute.
  std::string altered(const std::string& name, const std::vector<std::pair<std::string, std::string>>& changes) {
    std::ifstream in(kRacks + name);
    std::stringstream text;
    text << in.rdbuf();
    std::string rack = text.str();
    const auto replace = [&rack](const std::string& from, const std::string& to) {
      for (auto at = rack.find(from); at != std::string::npos; at = rack.find(from, at + to.size())) {
        rack.replace(at, from.size(), to);
      }
    };
    for (const auto& [from, to] : changes) replace(from, to);
    replace("\"../", "\"" + std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles/");
    const std::string path = folder_ + "/" + name;
    std::ofstream(path) << rack;
    return path;
  }
  std::string folder_;
};

TEST_F(Check, everyShippedFilePasses) {
  for (const char* folder : {"amplifiers", "relays", "racks"}) {
    for (const auto& entry : std::filesystem::directory_iterator(std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles/" + folder)) {
      if (entry.path().extension() != ".toml" || entry.path().stem().extension() == ".sim") continue;
      const Ran ran = run("check --json " + entry.path().string());
      EXPECT_EQ(ran.code, 0) << entry.path() << ran.out;
      EXPECT_TRUE(json::parse(ran.out).as_object().at("ok").as_bool());
    }
  }
}

TEST_F(Check, inAPipeThereIsNoEscapeSequence) {
  const Ran ran = run("check " + kRacks + "small_bench.toml 2>&1");
  EXPECT_EQ(ran.code, 0);
  EXPECT_EQ(ran.out.find('\x1b'), std::string::npos);
  EXPECT_NE(ran.out.find("carries lead loss"), std::string::npos);
}

TEST_F(Check, badUseIsExitTwo) {
  EXPECT_EQ(run("check 2> /dev/null").code, 2);
  EXPECT_EQ(run("check /nowhere.toml 2> /dev/null").code, 2);
  EXPECT_EQ(run("measure 2> /dev/null").code, 2);
  EXPECT_EQ(run("2> /dev/null").code, 2);
  EXPECT_EQ(run("check --help").code, 0);
  EXPECT_NE(run("check --help").out.find("shuntwright check profiles/racks/gantry_beam.toml"), std::string::npos);
}

// The question of the leads: which shunts of a 3-wire quarter bridge carry the loss (figures of a 120 ohm gauge with
// 5 ohm leads from the exact network, which the reference tests compare with a circuit simulator).
TEST_F(Check, saysWhichShuntPositionsCarryTheLeadLoss) {
  const Ran ran = run("check --json " + kRacks + "lead_positions.toml");
  ASSERT_EQ(ran.code, 0) << ran.out;
  std::map<std::string, bool> carries;
  std::map<std::string, double> step, strain;
  const json::value document = json::parse(ran.out);
  for (const auto& channel : document.as_object().at("channels").as_array()) {
    for (const auto& shunt : channel.as_object().at("shunts").as_array()) {
      const auto& s = shunt.as_object();
      const std::string name(s.at("name").as_string());
      carries[name] = s.at("carries_lead_loss").as_bool();
      step[name] = s.at("step_lead_percent_per_ohm").to_number<double>();
      strain[name] = s.at("strain_lead_percent_per_ohm").to_number<double>();
    }
  }
  int yes = 0, none = 0, over = 0;
  for (const auto& [name, value] : carries) {
    yes += value;
    none += std::abs(step[name]) < 1e-6;
    over += step[name] > 1;
    EXPECT_LT(strain[name], -0.5) << name;
    if (value) {
      EXPECT_NEAR(step[name] / strain[name], 1, 0.02) << name;
    }
  }
  EXPECT_EQ(yes, 2) << "the gauge's tabs and the completion resistor";
  EXPECT_EQ(none, 1) << "the inner half bridge";
  EXPECT_GE(over, 1) << "the shunt tapped through the sense lead";
}

TEST_F(Check, leadLossIntoTheSpanIsRefusedWhereTheStepDoesNotCarryIt) {
  const std::string rack = altered("lead_positions.toml", {{"expected = \"1000 microstrain\"", "lead_loss = \"in span\""}});
  const Ran ran = run("check --json " + rack);
  EXPECT_EQ(ran.code, 2);
  const json::value document = json::parse(ran.out);
  const auto& o = document.as_object();
  EXPECT_FALSE(o.at("ok").as_bool());
  int refused = 0;
  for (const auto& problem : o.at("problems").as_array()) {
    const auto& p = problem.as_object();
    EXPECT_GT(p.at("line").to_number<int>(), 0);
    EXPECT_GT(p.at("column").to_number<int>(), 0);
    const std::string message(p.at("message").as_string());
    refused += message.find("does not carry it") != std::string::npos && message.find("per ohm") != std::string::npos;
    EXPECT_FALSE(p.at("remedy").is_null());
  }
  EXPECT_GE(refused, 3) << "the half bridge, and the two that are tapped through a lead";
}

TEST_F(Check, mistakesOfMeaningAreAllToldInOneRun) {
  const std::string rack = altered("small_bench.toml", {{"circuit = \"quarter 3-wire\"", "circuit = \"quarter 3wire\""},
                                                        {"factor = 2.08", "factr = 2.08"},
                                                        {"\"174.65 kohm\" }\nRC2", "\"174.65 kOhms\" }\nRC2"},
                                                        {"relay = \"relays1/1\"", "relay = \"relays1/99\""}});
  const Ran ran = run("check " + rack + " 2>&1");
  EXPECT_EQ(ran.code, 2);
  EXPECT_NE(ran.out.find("quarter 3-wire"), std::string::npos) << "did you mean";
  EXPECT_NE(ran.out.find("factr"), std::string::npos);
  EXPECT_NE(ran.out.find("kOhms"), std::string::npos);
  EXPECT_NE(ran.out.find("small_bench.toml:"), std::string::npos);
  EXPECT_NE(ran.out.find("^"), std::string::npos) << "a caret under the place";
}

TEST_F(Check, theBudgetToComeNamesWhatLimitsItAndWhatWouldHelp) {
  const Ran text = run("check --budget " + kRacks + "gantry_beam.toml");
  EXPECT_EQ(text.code, 0);
  EXPECT_NE(text.out.find("lead COMP"), std::string::npos) << "long leads in badly measured trays";
  EXPECT_NE(text.out.find("measure each lead"), std::string::npos);

  const Ran ran = run("check --json --budget " + kRacks + "gantry_beam.toml");
  ASSERT_EQ(ran.code, 0);
  const json::value document = json::parse(ran.out);
  for (const auto& channel : document.at("channels").as_array()) {
    if (channel.at("shunts").as_array().empty()) {
      EXPECT_TRUE(channel.at("budget").is_null());
      continue;
    }
    const auto& budget = channel.at("budget");
    const double now = budget.at("expanded_uncertainty_percent").to_number<double>();
    EXPECT_GT(now, 0);
    if (!budget.at("advice").is_null()) {
      EXPECT_LT(budget.at("expanded_uncertainty_then_percent").to_number<double>(), 0.9 * now);
    }
  }
}

TEST_F(Check, theLinesOfOneBudgetAreShown) {
  const Ran ran = run("check --budget --lines Q3 " + kRacks + "small_bench.toml");
  EXPECT_EQ(ran.code, 0);
  for (const char* what : {"Uncertainty budget of the scale, channel Q3", "shunt resistor RC1", "deg. of freedom", "expanded U ="}) {
    EXPECT_NE(ran.out.find(what), std::string::npos) << what;
  }
  EXPECT_EQ(run("check --lines Q3 " + kRacks + "small_bench.toml").code, 2) << "of which budget?";
}

TEST_F(Check, leadsToBeIdentifiedAreToldBeforehand) {
  const Ran ran = run("check --json --budget " + kRacks + "every_circuit.toml");
  ASSERT_EQ(ran.code, 0) << ran.out;
  const json::value document = json::parse(ran.out);
  for (const auto& channel : document.at("channels").as_array()) {
    const auto& budget = channel.at("budget");
    const bool identified = channel.at("name").as_string() == "Q3-id";
    EXPECT_EQ(budget.at("lead_expanded_uncertainty_ohm").is_null(), !identified);
    if (identified) {
      EXPECT_LT(budget.at("lead_expanded_uncertainty_ohm").to_number<double>(), 0.2);
    }
  }
  // Two positions that change with the leads alike tell nothing.
  const Ran blind = run("check --json --budget " + altered("every_circuit.toml", {{"across = [\"COMP\", \"EXC-\"]", "across = \"completion\""}}));
  EXPECT_EQ(blind.code, 2);
  EXPECT_NE(blind.out.find("the leads of channel \\\"Q3-id\\\" cannot be identified"), std::string::npos) << blind.out;
}

TEST_F(Check, aMonteCarloSecondsTheBudget) {
  const Ran ran = run("check --json --budget --monte-carlo " + kRacks + "small_bench.toml");
  ASSERT_EQ(ran.code, 0) << ran.out;
  const json::value document = json::parse(ran.out);
  int seconded = 0;
  for (const auto& channel : document.at("channels").as_array()) {
    if (channel.at("budget").is_null()) continue;
    const auto& budget = channel.at("budget");
    EXPECT_TRUE(budget.at("monte_carlo_agrees").as_bool()) << channel.at("name").as_string();
    EXPECT_LT(budget.at("monte_carlo_low_percent").to_number<double>(), 0);
    EXPECT_GE(budget.at("monte_carlo_trials").to_number<int>(), 10'000);
    ++seconded;
  }
  EXPECT_GE(seconded, 3);
  EXPECT_EQ(run("check --monte-carlo " + kRacks + "small_bench.toml").code, 2) << "of which budget?";
}

}  // namespace
