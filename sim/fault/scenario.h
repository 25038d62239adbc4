#pragma once

#include <map>
#include <optional>
#include <set>
#include <string>
#include <utility>
#include <vector>

#include "driver/core/clock.h"
#include "driver/description/rack.h"
#include "driver/units/units.h"

namespace shuntwright::sim {

/// How large the simulated imperfections are. The defaults are a healthy bench. "scale" figures multiply the
/// tolerance that rack or profile state.
struct Imperfections {
  double gauges = 1, completions = 1, leads = 1, resistors = 1, gaugeFactors = 1, contacts = 1;
  bool leadsWarm = true;                ///< their temperature wanders within the stated tolerance
  double spanTolerance = 5e-3;          ///< amplifier, half-width, relative
  units::Ratio offset = 10e-3 * units::millivolt_per_volt;       ///< amplifier, half-width
  units::Ratio drift = 0.1e-3 * units::millivolt_per_volt;       ///< amplitude of a slow wander of the offset
  double batches = 0;                   ///< 0..1, how much of a gauge factor's deviation a whole packet shares
  units::Strain selfHeating;            ///< apparent strain of a gauge heated with 1 kW/m2 of its grid, when warm
  units::Ratio flicker;                 ///< 1/f noise, standard deviation of one decade of frequency
  units::Ratio noise = 0.2e-3 * units::millivolt_per_volt;       ///< white, standard deviation of a sample
  units::Ratio mains = 0.1e-3 * units::millivolt_per_volt;       ///< 50 Hz amplitude
  Nanoseconds answerDelay = std::chrono::milliseconds(1);
  Nanoseconds sendEvery = std::chrono::milliseconds(50);  ///< streamed frames go out this often, several at once
};

/// Something that a device does wrong from a certain request on.
struct DeviceFault {
  enum class Kind { mute, garbage, half_answer, error_answer, late };
  Kind kind = Kind::mute;
  std::string request;   ///< "identify", "read", "stream start", "stream stop", "set rate", "set excitation",
                         ///< "close", "open", "open all", "state"; empty: any
  int from = 1;          ///< first request of that name that it hits
  int count = 1 << 30;   ///< how many
  Nanoseconds delay{0};  ///< of a late answer
};

struct DeviceFaults {
  std::vector<DeviceFault> requests;
  double lostFrames = 0;                 ///< probability that a streamed frame is dropped (its counter counts on)
  std::optional<Nanoseconds> silentAfter;  ///< since the start: nothing more is sent or heard
  std::optional<Nanoseconds> unpluggedAfter;  ///< since the start: its connection ends; relays stay as they are
  std::optional<Nanoseconds> unpluggedFor;    ///< then it can be reached again; empty: never
};

struct ChannelFaults {
  double shuntScale = 1;      ///< the resistors are this much larger than stated
  double noiseScale = 1;
  bool openLead = false;      ///< the SIG+ lead (or the first there is)
  bool saturated = false;
  double bend = 0;            ///< the amplifier's span grows by this share for each mV/V of signal
  units::Strain noReturn;     ///< strain left behind by each closing of a shunt
};

/// Where a gauge is on the beam.
struct GaugePlace {
  units::Length alongBeam;     ///< from the left support
  units::Length fibre;         ///< distance from the neutral axis, positive towards the tension side
  double angle_deg = 0;        ///< from the beam's axis (left to right) towards the tension side
  bool web = false;            ///< on the web, which alone carries the shear force
};

/// A simply supported beam with one load at mid-span.
struct Beam {
  units::Length span = 12.0 * units::metre;
  units::Stress modulus = 210.0 * units::gigapascal;
  double secondMoment_m4 = 4.6e-4;
  double poisson = 0.3;
  units::Area webArea = 6800.0 * units::square_millimetre;
  units::Temperature temperature = units::Temperature::celsius(21);  ///< at the start of everything
  units::TemperatureDifference warming = 2.0 * units::kelvin;        ///< by how much it will be warmer in the end
  Nanoseconds warmingTime = std::chrono::seconds(900);               ///< time constant of that
};

struct Scenario {
  Imperfections imperfections;
  Beam beam;
  units::Force maxLoad = 180.0 * units::kilonewton;
  std::vector<double> levels{0.2, 0.4, 0.6, 0.8, 1.0, 0.8, 0.6, 0.4, 0.2, 0.0};  ///< parts of maxLoad
  Nanoseconds ramp = std::chrono::seconds(4);
  Nanoseconds hold = std::chrono::seconds(6);
  std::map<std::string, GaugePlace> places;  ///< channels that are not here follow their `expected` strain
  std::map<std::string, DeviceFaults> devices;
  std::map<std::string, ChannelFaults> channels;
  std::set<description::RelayRef> dead;      ///< never close
  std::set<description::RelayRef> welded;    ///< never open once closed
  std::vector<std::pair<description::RelayRef, description::RelayRef>> swapped;
};

}  // namespace shuntwright::sim
