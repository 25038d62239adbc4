#include <cmath>
#include <cstdio>

#include "driver/calibration/analysis.h"

namespace shuntwright::calibration {

using namespace units;

namespace {

std::string number(double value, int decimals) {
  char out[48];
  std::snprintf(out, sizeof out, "%.*f", decimals, value);
  return out;
}

std::string mVperV(Ratio r) { return number(r.in(millivolt_per_volt), 5) + " mV/V"; }

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
    const double back = microstrainOf(shunt_.returned - shunt_.before);
    if (back > limits_.zeroReturn.in(microstrain)) {
      find("no-zero-return", "the reading does not come back after shunt \"" + shunt_.name + "\"",
           "off by " + number(back, 1) + " microstrain, limit " +
               number(limits_.zeroReturn.in(microstrain), 1));
    }
    const double noise = microstrainOf(shunt_.noise);
    if (noise > limits_.noise.in(microstrain)) {
      find("noisy", "the channel is noisy",
           "standard deviation " + number(noise, 2) + " microstrain a sample, limit " +
               number(limits_.noise.in(microstrain), 2));
    }
  }

 private:
  double microstrainOf(Ratio r) const { return slope_ > 0 ? std::abs(r.in(volt_per_volt)) / slope_ * 1e6 : 0; }

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
    const double noise = shunt_.noise.in(volt_per_volt);
    const std::string evidence = "measured " + mVperV(shunt_.measuredStep) + ", predicted " + mVperV(shunt_.predictedStep);
    if (std::abs(measured) < std::max(0.1 * std::abs(predicted), 3 * noise)) {
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
    const double deviation = measured / predicted - 1;
    if (std::abs(deviation) > limits_.spanDeviation.in(one)) {
      find("span-deviates", "the step of shunt \"" + shunt_.name + "\" is out of limits",
           evidence + ": " + number(100 * deviation, 2) + " %, limit " +
               number(limits_.spanDeviation.in(percent), 2) + " %");
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

/// A few lost samples cost a window nothing and are only counted; with more, something is wrong with the wire.
void lostSamples(ChannelResult& result, const ChannelReadings& readings) {
  int taken = readings.zero ? readings.zero->samples : 0;
  for (const auto& shunt : readings.shunts) {
    for (const auto* windows : {&shunt.opened, &shunt.closed}) {
      for (const auto& w : *windows) taken += w.samples;
    }
  }
  constexpr double kTooMany = 0.1;  // common practice, no source
  if (result.lostSamples <= kTooMany * (taken + result.lostSamples)) return;
  result.findings.push_back({"lost-samples", "many samples were lost between device and driver",
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
  if (readings.zero && readings.zero->saturated > 0) {
    result.findings.push_back({"saturated", "the input is over range at no load",
                               std::to_string(readings.zero->saturated) + " samples at full scale"});
  }
  const double off = std::abs(result.zero.in(millivolt_per_volt));
  if (!result.shunts.empty() && off > limits.unbalance.in(millivolt_per_volt)) {
    result.findings.push_back({"unbalanced", "the bridge is far off balance",
                               number(off, 3) + " mV/V, limit " + number(limits.unbalance.in(millivolt_per_volt), 3) +
                                   " mV/V"});
  }
  if (result.shunts.empty()) {
    result.verdict = result.findings.empty() ? Verdict::not_calibrated : Verdict::fail;
  } else {
    result.verdict = result.findings.empty() ? Verdict::pass : Verdict::fail;
  }
}

}  // namespace shuntwright::calibration
