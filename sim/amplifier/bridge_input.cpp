#include "sim/amplifier/bridge_input.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace shuntwright::sim {

using namespace units;

namespace {
constexpr double kFlickerShortest_s = 0.02, kFlickerLongest_s = 1000;
constexpr double kHeating_s = 30;
// How often the circuit is solved anew: under a moving load ten times a second, else only the leads' temperature
// moves, over minutes.
constexpr Nanoseconds kLoadTick = std::chrono::milliseconds(100), kIdleTick = std::chrono::seconds(5);
}  // namespace

LoadClock::Phase LoadClock::mains(Instant when) const {
  if (when != known_) {
    const double angle = 2 * std::numbers::pi * 50 * seconds(when - start);
    phase_ = {std::sin(angle), std::cos(angle)};
    known_ = when;
  }
  return phase_;
}

BridgeInput::BridgeInput(TrueChannel channel, const Specimen& specimen, const LoadClock& clock,
                         const description::Inputs& inputs, const Imperfections& imperfections,
                         const ChannelFaults& faults, Random random, double kW_per_m2)
    : channel_(std::move(channel)),
      specimen_(&specimen),
      clock_(&clock),
      imperfections_(imperfections),
      flicker_(imperfections.flicker.in(volt_per_volt), kFlickerShortest_s, kFlickerLongest_s, random.fork(1)),
      heated_(imperfections.selfHeating.in(strain) * kW_per_m2),
      faults_(faults),
      random_(random),
      span_(1 + random_.uniform(-1, 1) * imperfections.spanTolerance),
      offset_(random_.uniform(-1, 1) * imperfections.offset.in(volt_per_volt)),
      driftPhase_(random_.uniform(0, 2 * std::numbers::pi)),
      driftPeriod_s_(random_.uniform(600, 3600)),
      mainsPhase_(random_.uniform(0, 2 * std::numbers::pi)),
      // A real filter is not quite the one of the data sheet.
      timeConstant_s_(seconds(inputs.filterTimeConstant) * random_.uniform(0.9, 1.05)),
      mainsSine_(imperfections.mains.in(volt_per_volt) * std::cos(mainsPhase_)),
      mainsCosine_(imperfections.mains.in(volt_per_volt) * std::sin(mainsPhase_)),
      last_(clock.start),
      nextRefresh_(clock.start),
      lastSample_(clock.start) {}

double BridgeInput::strainAt(Instant when) const {
  const double time_s = seconds(when - clock_->start);
  const double load_s = when < clock_->loadStart ? -1 : seconds(when - clock_->loadStart);
  return specimen_->strainOf(channel_.described(), load_s, time_s) + left_;
}

double BridgeInput::trueRatioAt(Instant when) const {
  const double time_s = seconds(when - clock_->start);
  const double heated = heated_ * (1 - std::exp(-std::max(0.0, time_s) / kHeating_s));
  return channel_.ratio(strainAt(when) + heated, channel_.leadWarming_K(time_s));
}

void BridgeInput::refresh(Instant now) {
  input_ = trueRatioAt(now);
  drift_ = imperfections_.drift.in(volt_per_volt) *
           std::sin(2 * std::numbers::pi * seconds(now - clock_->start) / driftPeriod_s_ + driftPhase_);
  const bool loaded = clock_->loadStart != Instant::max();
  nextRefresh_ = now + (loaded ? kLoadTick : kIdleTick);
  if (clock_->loadStart > now) nextRefresh_ = std::min(nextRefresh_, clock_->loadStart);
  if (!started_) {
    started_ = true;
    filtered_ = input_;
    last_ = now;
  }
}

void BridgeInput::touch(Instant when) {
  if (!started_) refresh(when);
  const Nanoseconds passed = when - last_;
  if (passed <= Nanoseconds(0)) return;
  if (passed != lastStep_) {
    lastStep_ = passed;
    remains_ = timeConstant_s_ > 0 ? std::exp(-seconds(passed) / timeConstant_s_) : 0;
  }
  filtered_ = input_ + (filtered_ - input_) * remains_;
  last_ = when;
}

void BridgeInput::contactChanged(Instant when, bool closed) {
  if (closed) left_ += faults_.noReturn.in(strain);
  refresh(when);
}

double BridgeInput::sample(Instant now) {
  touch(now);
  if (now >= nextRefresh_) refresh(now);
  const double noise = imperfections_.noise.in(volt_per_volt) * faults_.noiseScale * random_.normal();
  const auto [sine, cosine] = clock_->mains(now);
  const double flicker = flicker_.after(seconds(now - lastSample_));
  lastSample_ = now;
  const double bent = filtered_ * (1 + faults_.bend * 1e3 * filtered_);
  return span_ * bent + offset_ + drift_ + flicker + noise + mainsSine_ * sine + mainsCosine_ * cosine;
}

}  // namespace shuntwright::sim
