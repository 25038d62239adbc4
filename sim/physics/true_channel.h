#pragma once

#include <array>
#include <map>
#include <string>
#include <vector>

#include "driver/core/random.h"
#include "driver/description/rack.h"
#include "sim/fault/scenario.h"

namespace shuntwright::sim {

/// A shunt as it really is: its resistor, and whether its relay's contact is closed.
struct TrueShunt {
  description::Shunt described;
  double resistor_ohm = 0;
  bool closed = false;
  double contact_ohm = 0;
  double leakage_ohm = 0;  ///< across the open contact; 0: perfect
};

/// The air that all leads of a bench hang in, against what the rack states: both in parts of the leads'
/// stated tolerance. Air has weather, so the start is normal, and a working day only warms.
struct Hall {
  double start = 0;    ///< off the stated temperature when the bench began
  double warming = 0;  ///< by how much more it will be in the end
  static Hall drawn(Random random);
};

/// What a channel shares with others of its bench.
struct Shared {
  Hall hall;
  double batch = 0;  ///< of its packet of gauges: the factor's deviation in parts of the tolerance, -1..1
  /// Resistors by name, ohm: shunts of one resistor have one value. One that is not here is drawn by the
  /// channel.
  std::map<std::string, double> resistors = {};
};

/// The bench's resistors as they are: off by tolerance or certificate, and by their temperature.
std::map<std::string, double> drawnResistors(const description::Rack& rack,
                                             const Imperfections& imperfections, const Random& random);

/// One channel's circuit as it really is, drawn from a random source about what rack and profile state.
class TrueChannel {
 public:
  TrueChannel(const description::Rack& rack, const description::Channel& channel,
              const Imperfections& imperfections, const ChannelFaults& faults, Random random,
              Shared shared = {});

  const description::Channel& described() const { return *channel_; }
  std::vector<TrueShunt>& shunts() { return shunts_; }
  const std::vector<TrueShunt>& shunts() const { return shunts_; }
  double gaugeFactor() const { return gaugeFactor_; }
  double gauge_ohm() const { return arms_[0]; }
  /// Of one lead, so much warmer than the rack states.
  double lead_ohm(description::Terminal terminal, double warmer_K) const;

  /// Ratio at the amplifier's terminals (V/V), by node voltages.
  /// @param strain         at the gauge (fraction of rated value for a transducer)
  /// @param leadsWarmer_K  by how much the leads are warmer than the rack states
  double ratio(double strain, double leadsWarmer_K) const;

  /// By how much the leads are warmer than stated, at a time since the start: they follow the hall
  /// exponentially, each cable with a share and a lag of its own.
  double leadWarming_K(double seconds) const;
  /// Puts an end to chance: so much warmer than stated at first, and so much more after some minutes.
  void hangIn(double warmer_K, double warmsBy_K);

 private:
  const description::Channel* channel_;
  std::array<double, 4> arms_{};  ///< ohm, unstrained
  std::array<double, 4> relativePerStrain_{};
  std::array<double, description::kTerminals> leads_{};  ///< ohm at the stated temperature
  double inputResistance_ohm_ = 1e9;
  double excitationSeries_ohm_ = 0;
  double gaugeFactor_ = 2;
  double warmStart_K_ = 0, warmEnd_K_ = 0, warmTime_s_ = 600;
  std::vector<TrueShunt> shunts_;
};

}  // namespace shuntwright::sim
