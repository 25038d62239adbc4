#include <algorithm>
#include <cmath>
#include <cstdio>
#include <initializer_list>
#include <string_view>

#include "driver/calibration/analysis.h"

namespace shuntwright::calibration {

using namespace units;

namespace {

std::string number(double value, int decimals) {
  char out[48];
  std::snprintf(out, sizeof out, "%.*f", decimals, value);
  return out;
}

/// A limit on the size of a figure, and what counts against it.
class Bound {
 public:
  Bound(double limit, const description::Limits& limits) : limit_(limit), guarded_(limits.guardBand) {}

  bool holds(double size, double expandedUncertainty) const {
    return size + (guarded_ ? expandedUncertainty : 0) <= limit_;
  }

  /// "0.52 %, limit 0.50 %", with a guard band "0.45 % +- 0.10 %, limit 0.50 % with its guard band".
  std::string text(double size, double expandedUncertainty, int decimals, const std::string& unit) const {
    const auto with = [&](double value) { return number(value, decimals) + unit; };
    if (!guarded_) return with(size) + ", limit " + with(limit_);
    return with(size) + " +- " + with(expandedUncertainty) + ", limit " + with(limit_) +
           " with its guard band";
  }

 private:
  double limit_;
  bool guarded_;
};

std::string mVperV(Ratio r) {
  return number(r.in(millivolt_per_volt), 5) + " mV/V";
}

/// Judges one shunt of a channel.
class ShuntJudge {
 public:
  ShuntJudge(ChannelResult& channel, const ShuntResult& shunt, const ShuntReadings& readings,
             const description::Limits& limits, double slope)
      : channel_(channel), shunt_(shunt), readings_(readings), limits_(limits), slope_(std::abs(slope)) {}

  void judge() {
    if (readings_.relayError) {
      find("relay-error", "the relay of shunt \"" + shunt_.name + "\" did not do as told",
           readings_.relayError->text());
      return;
    }
    if (!samples()) return;
    if (!readings_.steady) {
      find("not-steady", "the reading did not settle with shunt \"" + shunt_.name + "\"",
           "still moving after " + number(seconds(shunt_.settling), 2) + " s");
    }
    if (step()) repeats();
    const Bound back(limits_.zeroReturn.in(microstrain), limits_);
    const double off = microstrainOf(shunt_.returned - shunt_.before);
    if (const double u = microstrainOf(shunt_.returnUncertainty); !back.holds(off, u)) {
      find("no-zero-return", "the reading does not come back after shunt \"" + shunt_.name + "\"",
           "off by " + back.text(off, u, 1, " microstrain"));
    }
    const Bound quiet(limits_.noise.in(microstrain), limits_);
    const double noise = microstrainOf(shunt_.noise);
    if (const double u = microstrainOf(shunt_.noiseUncertainty); !quiet.holds(noise, u)) {
      find("noisy", "the channel is noisy",
           "standard deviation of a sample " + quiet.text(noise, u, 2, " microstrain"));
    }
  }

 private:
  double microstrainOf(Ratio r) const {
    return slope_ > 0 ? std::abs(r.in(volt_per_volt)) / slope_ * 1e6 : 0;
  }

  void find(const char* code, std::string message, std::string evidence) {
    channel_.findings.push_back({code, std::move(message), std::move(evidence)});
  }

  bool samples() {
    int saturated = 0, missing = 0, usable = 0;
    for (const auto* windows : {&readings_.opened, &readings_.closed}) {
      for (const auto& w : *windows) {
        saturated += w.saturated;
        missing += w.missing;
        usable += w.samples;
      }
    }
    if (saturated > 0) {
      find("saturated", "the input is over range with shunt \"" + shunt_.name + "\"",
           std::to_string(saturated) + " samples at full scale");
    }
    if (missing > 0) {
      find("no-samples", "the device sent no value for some samples", std::to_string(missing) + " samples");
    }
    if (usable == 0 && saturated == 0 && missing == 0) find("no-samples", "no sample came", "");
    return usable > 0 && saturated == 0;
  }

  /// Whether there is a step at all; the spread of one that is missing says nothing.
  bool step() {
    const double measured = shunt_.measuredStep.in(volt_per_volt);
    const double predicted = shunt_.predictedStep.in(volt_per_volt);
    const double noise = shunt_.returnUncertainty.in(volt_per_volt);
    const std::string evidence =
        "measured " + mVperV(shunt_.measuredStep) + ", predicted " + mVperV(shunt_.predictedStep);
    if (std::abs(measured) < std::max(0.1 * std::abs(predicted), 1.5 * noise)) {
      find("step-missing",
           "closing the relay of shunt \"" + shunt_.name +
               "\" changes nothing: a dead relay, relays swapped, or a shunt that is "
               "not connected",
           evidence);
      return false;
    }
    if (measured * predicted < 0) {
      find("wrong-sign",
           "the step of shunt \"" + shunt_.name +
               "\" has the wrong sign: another arm is shunted, or the "
               "signal leads are swapped",
           evidence);
      return true;
    }
    const Bound bound(limits_.spanDeviation.in(percent), limits_);
    const double deviation = 100 * std::abs(measured / predicted - 1);
    if (const double u = shunt_.deviationUncertainty.in(percent); !bound.holds(deviation, u)) {
      find("span-deviates", "the step of shunt \"" + shunt_.name + "\" is out of limits",
           evidence + (std::abs(measured) < std::abs(predicted) ? ", too small by " : ", too large by ") +
               bound.text(deviation, u, 2, " %"));
    }
    return true;
  }

  void repeats() {
    const double step = std::abs(shunt_.measuredStep.in(volt_per_volt));
    if (step <= 0) return;
    const double spread = shunt_.stepDeviation.in(volt_per_volt) / step;
    if (spread > limits_.repeatability.in(one)) {
      find("not-repeatable", "repeated steps of shunt \"" + shunt_.name + "\" differ",
           "standard deviation " + number(100 * spread, 2) + " %, limit " +
               number(limits_.repeatability.in(percent), 2) + " %");
    }
  }

  ChannelResult& channel_;
  const ShuntResult& shunt_;
  const ShuntReadings& readings_;
  const description::Limits& limits_;
  double slope_;
};

bool has(const ChannelResult& result, std::initializer_list<std::string_view> codes) {
  return std::ranges::any_of(
      result.findings, [&](const Finding& f) { return std::ranges::find(codes, f.code) != codes.end(); });
}

/// A step that is not what it seems bends every line and misleads every fit; it has been told already.
bool stepsAreDoubtful(const ChannelResult& result) {
  return has(result, {"relay-error", "step-missing", "wrong-sign", "saturated"});
}

/// Do several shunts tell of one straight chain?
void straightness(ChannelResult& result, const description::Limits& limits) {
  if (!result.straightness || stepsAreDoubtful(result)) return;
  const Straightness& line = *result.straightness;
  const Bound bound(limits.linearity.in(percent), limits);
  if (!bound.holds(line.worst_percent, line.expandedUncertainty_percent)) {
    result.findings.push_back(
        {"not-linear", "the steps of the shunts do not lie on one line",
         "off by up to " +
             bound.text(line.worst_percent, line.expandedUncertainty_percent, 3, " % of the largest step")});
  }
  constexpr double kUnlikely = 1e-4;  // common practice, no source; one false alarm in 10 000 channels
  if (line.probability < kUnlikely) {
    result.findings.push_back({"shunts-disagree",
                               "the shunts disagree by more than their stated tolerances: a resistor is not "
                               "what the rack says, an arm is "
                               "wired otherwise, or the amplifier is not linear",
                               "chi-square " + number(line.chiSquared, 1) + " with " +
                                   number(line.degreesOfFreedom, 0) + " degrees of freedom"});
  }
}

void leadsAsStated(ChannelResult& result, const description::Limits& limits) {
  if (!result.leads || !result.leads->identifiable || stepsAreDoubtful(result)) return;
  const double stated = result.leads->stated.in(ohm);
  const Bound bound(limits.leadDeviation.in(percent), limits);
  const double off = stated > 0 ? 100 * std::abs(result.leads->resistance.in(ohm) / stated - 1) : 0;
  const double u = stated > 0 ? 100 * result.leads->expandedUncertainty.in(ohm) / stated : 0;
  if (bound.holds(off, u)) return;
  result.findings.push_back({"leads-differ",
                             "the leads are not what the rack says: another cable, or a poor contact",
                             number(result.leads->resistance.in(ohm), 3) + " ohm found, " +
                                 number(stated, 3) + " ohm stated: off by " + bound.text(off, u, 1, " %")});
}

/// A few lost samples cost a window nothing and are only counted; with more, something is wrong with the
/// wire.
void lostSamples(ChannelResult& result, const ChannelReadings& readings) {
  int taken = readings.zero ? readings.zero->samples : 0;
  for (const auto& shunt : readings.shunts) {
    for (const auto* windows : {&shunt.opened, &shunt.closed}) {
      for (const auto& w : *windows) taken += w.samples;
    }
  }
  constexpr double kTooMany = 0.1;  // common practice, no source
  if (result.lostSamples <= kTooMany * (taken + result.lostSamples)) return;
  result.findings.push_back(
      {"lost-samples", "many samples were lost between device and driver",
       std::to_string(result.lostSamples) + " lost, " + std::to_string(taken) + " read"});
}

}  // namespace

void judge(ChannelResult& result, const ChannelReadings& readings, const description::Limits& limits,
           double slope_per_strain) {
  for (std::size_t k = 0; k < result.shunts.size(); ++k) {
    ShuntJudge(result, result.shunts[k], readings.shunts[k], limits, slope_per_strain).judge();
  }
  if (readings.zero && readings.zero->missing > 0) {
    result.findings.push_back({"no-samples", "the device sent no value for some samples at no load",
                               std::to_string(readings.zero->missing) + " samples"});
  }
  lostSamples(result, readings);
  straightness(result, limits);
  leadsAsStated(result, limits);
  if (readings.zero && readings.zero->saturated > 0) {
    result.findings.push_back({"saturated", "the input is over range at no load",
                               std::to_string(readings.zero->saturated) + " samples at full scale"});
  }
  const double off = std::abs(result.zero.in(millivolt_per_volt));
  const Bound balanced(limits.unbalance.in(millivolt_per_volt), limits);
  if (const double u = result.zeroReadingUncertainty.in(millivolt_per_volt);
      !result.shunts.empty() && !balanced.holds(off, u)) {
    result.findings.push_back(
        {"unbalanced", "the bridge is far off balance", balanced.text(off, u, 3, " mV/V")});
  }
  if (result.shunts.empty()) {
    result.verdict = result.findings.empty() ? Verdict::not_calibrated : Verdict::fail;
  } else {
    result.verdict = result.findings.empty() ? Verdict::pass : Verdict::fail;
  }
}

}  // namespace shuntwright::calibration
