#pragma once

#include <string>

#include "driver/core/clock.h"
#include "driver/core/random.h"
#include "driver/description/profile.h"
#include "sim/fault/scenario.h"
#include "sim/physics/specimen.h"
#include "sim/physics/true_channel.h"

namespace shuntwright::sim {

/// When the load test began, if it has; shared by all inputs of a bench.
struct LoadClock {
  Instant start;
  Instant loadStart = Instant::max();
};

/// One amplifier input with a channel on it: circuit, filter, span, offset, noise, converter.
///
/// The circuit is solved only when something changed: a contact, or from time to time the strain and the leads'
/// temperature; between that the ratio stands and the filter runs on analytically.
class BridgeInput {
 public:
  BridgeInput(TrueChannel channel, const Specimen& specimen, const LoadClock& clock, const description::Inputs& inputs,
              const Imperfections& imperfections, const ChannelFaults& faults, Random random);

  TrueChannel& channel() { return channel_; }
  const TrueChannel& channel() const { return channel_; }
  double span() const { return span_; }

  /// A contact of this channel's shunts is about to change, or has: the filter is brought up to `when`.
  void touch(Instant when);
  void contactChanged(Instant when, bool closed);

  /// One conversion: V/V as the amplifier shows it, before quantisation.
  double sample(Instant now);
  bool saturated() const { return faults_.saturated; }

  double strainAt(Instant when) const;
  double trueRatioAt(Instant when) const;

 private:
  void refresh(Instant now);

  TrueChannel channel_;
  const Specimen* specimen_;
  const LoadClock* clock_;
  Imperfections imperfections_;
  ChannelFaults faults_;
  Random random_;
  double span_, offset_, driftPhase_, driftPeriod_s_, mainsPhase_, timeConstant_s_;
  double input_ = 0;     ///< ratio at the terminals
  double filtered_ = 0;  ///< behind the filter
  double left_ = 0;      ///< strain left behind by closings (no zero return)
  double drift_ = 0;
  Instant last_, nextRefresh_;
  bool started_ = false;
};

}  // namespace shuntwright::sim
