#pragma once

#include <string>

#include "driver/core/clock.h"
#include "driver/core/random.h"
#include "driver/description/profile.h"
#include "sim/fault/scenario.h"
#include "sim/physics/flicker.h"
#include "sim/physics/specimen.h"
#include "sim/physics/true_channel.h"

namespace shuntwright::sim {

/// What all inputs of a bench share: when it began, when the load test did, and the mains' phase.
class LoadClock {
 public:
  Instant start;
  Instant loadStart = Instant::max();

  struct Phase {
    double sine = 0, cosine = 1;
  };
  /// Of 50 Hz; inputs sampled together ask for the same time.
  Phase mains(Instant when) const;

 private:
  mutable Instant known_ = Instant::min();
  mutable Phase phase_;
};

/// One amplifier input with a channel on it: circuit, filter, span, offset, noise, converter.
///
/// The circuit is solved only when something changed: a contact, or from time to time the strain and the leads'
/// temperature; between that the ratio stands and the filter runs on analytically.
class BridgeInput {
 public:
  /// @param kW_per_m2  what the excitation puts into the gauge's grid; 0: unknown or no gauge
  BridgeInput(TrueChannel channel, const Specimen& specimen, const LoadClock& clock, const description::Inputs& inputs,
              const Imperfections& imperfections, const ChannelFaults& faults, Random random, double kW_per_m2 = 0);

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
  Flicker flicker_;
  double heated_ = 0;  ///< apparent strain of the warm gauge
  ChannelFaults faults_;
  Random random_;
  double span_, offset_, driftPhase_, driftPeriod_s_, mainsPhase_, timeConstant_s_;
  double mainsSine_, mainsCosine_;  ///< V/V
  Nanoseconds lastStep_{0};         ///< between two samples, and what remains of a difference after it
  double remains_ = 1;
  double input_ = 0;     ///< ratio at the terminals
  double filtered_ = 0;  ///< behind the filter
  double left_ = 0;      ///< strain left behind by closings (no zero return)
  double drift_ = 0;
  Instant last_, nextRefresh_, lastSample_;
  bool started_ = false;
};

}  // namespace shuntwright::sim
