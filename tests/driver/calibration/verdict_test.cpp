#include <gtest/gtest.h>

#include <algorithm>
#include <functional>
#include <string>
#include <vector>

#include "driver/calibration/analysis.h"

namespace shuntwright::calibration {
namespace {

using namespace units;

constexpr double kSlope = 0.5;  // of a quarter bridge with K = 2: 1 microstrain is 0.5 microvolt per volt

Ratio strainAsRatio(double microstrains) {
  return microstrains * kSlope * 1e-6 * volt_per_volt;
}

/// A channel with two shunts about which nothing is wrong and nothing is uncertain.
struct Channel {
  ChannelResult result;
  ChannelReadings readings;
  description::Limits limits;

  Channel() {
    for (const char* name : {"low", "high"}) {
      ShuntResult shunt;
      shunt.name = name;
      shunt.measuredStep = shunt.predictedStep = strainAsRatio(-1000);
      shunt.repeats = 2;
      result.shunts.push_back(shunt);
      ShuntReadings taken;
      Window window;
      window.samples = 50;
      taken.opened = {window, window, window};
      taken.closed = {window, window};
      readings.shunts.push_back(taken);
    }
    readings.zero = Window{};
    result.straightness = Straightness{.degreesOfFreedom = 1};
  }

  std::vector<std::string> codes() {
    result.findings.clear();
    judge(result, readings, limits, kSlope);
    std::vector<std::string> codes;
    for (const auto& finding : result.findings) codes.push_back(finding.code);
    return codes;
  }
};

using Codes = std::vector<std::string>;

TEST(Verdict, nothingWrongIsAPass) {
  Channel channel;
  EXPECT_EQ(channel.codes(), Codes{});
  EXPECT_EQ(channel.result.verdict, Verdict::pass);
}

// Each figure is put at a share of its limit, with an expanded uncertainty of a share of it. JCGM
// 106:2012, 8.3.2: with a guard band w = U the acceptance limit is the tolerance limit less U.
TEST(Verdict, aGuardBandCountsTheUncertaintyAgainstTheFigure) {
  struct Case {
    const char* code;
    std::function<void(Channel&, double figure, double uncertainty)> put;  ///< shares of the limit
  };
  const std::vector<Case> cases{
      {"span-deviates",
       [](Channel& c, double figure, double uncertainty) {
         auto& shunt = c.result.shunts[0];
         shunt.measuredStep = shunt.predictedStep * (1 - figure * c.limits.spanDeviation.in(one));
         shunt.deviationUncertainty = uncertainty * c.limits.spanDeviation;
       }},
      {"no-zero-return",
       [](Channel& c, double figure, double uncertainty) {
         auto& shunt = c.result.shunts[1];
         shunt.returned = strainAsRatio(figure * c.limits.zeroReturn.in(microstrain));
         shunt.returnUncertainty = strainAsRatio(uncertainty * c.limits.zeroReturn.in(microstrain));
       }},
      {"noisy",
       [](Channel& c, double figure, double uncertainty) {
         auto& shunt = c.result.shunts[1];
         shunt.noise = strainAsRatio(figure * c.limits.noise.in(microstrain));
         shunt.noiseUncertainty = strainAsRatio(uncertainty * c.limits.noise.in(microstrain));
       }},
      {"unbalanced",
       [](Channel& c, double figure, double uncertainty) {
         c.result.zero = -figure * c.limits.unbalance;
         c.result.zeroReadingUncertainty = uncertainty * c.limits.unbalance;
       }},
      {"not-linear",
       [](Channel& c, double figure, double uncertainty) {
         c.result.straightness->worst_percent = figure * c.limits.linearity.in(percent);
         c.result.straightness->expandedUncertainty_percent = uncertainty * c.limits.linearity.in(percent);
       }},
      {"leads-differ",
       [](Channel& c, double figure, double uncertainty) {
         LeadIdentification leads;
         leads.identifiable = true;
         leads.stated = 5.0 * ohm;
         leads.resistance = 5.0 * (1 - figure * c.limits.leadDeviation.in(one)) * ohm;
         leads.expandedUncertainty = 5.0 * uncertainty * c.limits.leadDeviation.in(one) * ohm;
         c.result.leads = leads;
       }},
  };
  struct Row {
    double figure, uncertainty;
    bool passes, passesGuarded;
  };
  for (const auto& [code, put] : cases) {
    for (const Row row :
         {Row{0.7, 0.2, true, true}, {0.9, 0.2, true, false}, {0.9, 0, true, true}, {1.1, 0, false, false}}) {
      for (const bool guarded : {false, true}) {
        SCOPED_TRACE(std::string(code) + (guarded ? ", guarded, " : ", ") + std::to_string(row.figure) +
                     " +- " + std::to_string(row.uncertainty));
        Channel channel;
        channel.limits.guardBand = guarded;
        put(channel, row.figure, row.uncertainty);
        const bool passes = guarded ? row.passesGuarded : row.passes;
        EXPECT_EQ(channel.codes(), passes ? Codes{} : Codes{code});
        EXPECT_EQ(channel.result.verdict, passes ? Verdict::pass : Verdict::fail);
        for (const auto& finding : channel.result.findings) {
          EXPECT_EQ(finding.evidence.find("guard band") != std::string::npos, guarded) << finding.evidence;
        }
      }
    }
  }
}

TEST(Verdict, shuntsThatDisagreeAreToldWhereNoSingleStepIsOutOfLimits) {
  Channel channel;
  channel.result.straightness->chiSquared = 30;
  channel.result.straightness->probability = 4e-8;
  EXPECT_EQ(channel.codes(), Codes{"shunts-disagree"});
  // A step that is missing bends the line, and is told as what it is.
  channel.result.shunts[0].measuredStep = Ratio();
  EXPECT_EQ(channel.codes(), Codes{"step-missing"});
}

// A small step may drown in the samples' noise and still be there: what counts is the noise of the windows.
TEST(Verdict, aStepIsMissingOnlyIfTheWindowsDoNotShowIt) {
  Channel channel;
  auto& shunt = channel.result.shunts[0];
  shunt.measuredStep = shunt.predictedStep = strainAsRatio(3);
  shunt.noise = strainAsRatio(4);
  shunt.returnUncertainty = strainAsRatio(0.5);
  EXPECT_EQ(channel.codes(), Codes{});
  shunt.returnUncertainty = strainAsRatio(2.5);
  EXPECT_EQ(channel.codes(), Codes{"step-missing"});
}

}  // namespace
}  // namespace shuntwright::calibration
