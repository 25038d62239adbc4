#pragma once

#include <array>
#include <chrono>
#include <map>
#include <memory>
#include <optional>
#include <string>
#include <utility>
#include <vector>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/description/profile.h"
#include "driver/description/rosette.h"
#include "driver/description/thermal_output.h"
#include "driver/description/wiring.h"
#include "driver/units/units.h"

namespace shuntwright::description {

/// Where a device is plugged in: "serial:/dev/ttyUSB0", "tcp:127.0.0.1:5025", "replay:FILE".
struct Port {
  enum class Kind { serial, tcp, replay };
  Kind kind = Kind::tcp;
  std::string path;  ///< device node, host or file
  int tcpPort = 0;
  std::string text;  ///< as written
};

struct Device {
  Place place;
  std::string name;
  std::shared_ptr<const Profile> profile;
  Port port;
  std::string serialNumber;                 ///< expected; empty: any
  std::optional<units::Frequency> rate;     ///< samples/s a channel; none: the profile's first
};

/// What the packet says of a gauge. `factor` and `resistance` are nominal; tolerances are rectangular.
struct GaugeSheet {
  Place place;
  std::string name;
  units::GaugeFactor factor;
  units::Fraction factorTolerance = 1.0 * units::percent;
  Toleranced resistance{120.0 * units::ohm, 0.3 * units::percent};
  std::optional<units::Area> gridArea;
  std::string specimen;  ///< what it is bonded to, for the heating warning: "steel", "aluminium", ...
  std::optional<ThermalOutput> thermalOutput;
  units::TemperatureCoefficient factorSlope;  ///< relative change of the factor per kelvin
  units::Temperature factorTemperature = units::Temperature::celsius(24);  ///< where `factor` holds
  std::optional<units::Fraction> transverseSensitivity;
  double transversePoisson = 0.285;           ///< of the bar on which the maker found the factor
};

/// What a channel says of the gauge in one arm, where it differs from the others.
struct ArmGauge {
  std::optional<Toleranced> resistance;  ///< measured: value and expanded uncertainty as fraction
  std::optional<units::GaugeFactor> factor;
  std::optional<units::Fraction> factorTolerance;
};

/// The gauge in one arm with everything filled in.
struct GaugeOfArm {
  units::GaugeFactor factor;
  units::Fraction factorTolerance;
  Toleranced resistance;  ///< tolerance of the packet, or expanded uncertainty (k = 2) where measured
  bool measured = false;
};

/// A precision resistor that relays switch.
struct Resistor {
  Place place;
  std::string name;
  units::Resistance value;                  ///< in the rack: carried over from the certificate's temperature
  units::Fraction tolerance;                ///< rectangular half-width; 0 when a certificate gives U
  units::Fraction expandedUncertainty;      ///< of the certificate; 0 when only a tolerance is known
  double coverageFactor = 2;
  units::TemperatureCoefficient temperatureCoefficient;
  units::TemperatureDifference temperatureSpan;  ///< half-width of the resistor's temperature about that in the rack
  std::string certificate;
  std::optional<std::chrono::year_month_day> due;  ///< last day on which the certificate holds
};

/// One wire. Known by its resistance or by length and wire number.
struct Lead {
  Place place;
  units::Resistance resistance;             ///< at `temperature`, worked out from length and AWG if given so
  units::Fraction tolerance = 2.0 * units::percent;
  units::Temperature temperature = units::Temperature::celsius(20);
  units::TemperatureDifference temperatureTolerance = 5.0 * units::kelvin;  ///< half-width
  std::optional<units::Length> length;
  std::optional<int> awg;
};

struct RelayRef {
  std::string device;
  int relay = 0;  ///< as numbered on the wire
  friend auto operator<=>(const RelayRef&, const RelayRef&) = default;
};

/// A resistor that a relay puts between two terminals.
struct Shunt {
  Place place;
  std::string name;
  std::string resistor;                     ///< key of Rack::resistors
  RelayRef relay;
  std::pair<Terminal, Terminal> across;
  Side side = Side::instrument;
};

/// Where the loss in the leads goes. It is applied once.
enum class LeadLoss {
  in_prediction,  ///< lead resistance is known and lies in the predicted step; the span is the amplifier's own
  in_span,        ///< lead resistance is not known; only allowed for shunts whose step carries the loss
  identified,     ///< lead resistance and span are found together, from shunts whose steps change with it unlike
};

/// Why the bridge is off zero with nothing applied. It decides the scale at the working point.
enum class Unbalance { unknown, standing_strain, gauge_off_nominal, completion };

/// What a transducer's certificate says of one resistor across two of its own terminals: by how much it moves the
/// output at no load.
struct CertificateShunt {
  units::Resistance resistance;
  std::pair<Terminal, Terminal> across;
  units::Ratio step;  ///< its size; the sign follows from the terminals
  units::Fraction tolerance;
};

/// Data of a bought transducer.
struct TransducerSheet {
  units::Resistance inputResistance = 380.0 * units::ohm;
  units::Resistance outputResistance = 350.0 * units::ohm;
  units::Fraction inputTolerance;   ///< of the input resistance; 0: as measured
  units::Fraction outputTolerance;  ///< of the output resistance; 0: as measured
  units::Ratio sensitivity = 2.0 * units::millivolt_per_volt;  ///< at rated value
  units::Fraction sensitivityTolerance = 0.1 * units::percent;
  double ratedValue = 0;
  std::string unit;  ///< "kN", "degC", ...
  std::optional<CertificateShunt> certificateShunt;  ///< says what the arms look like from outside, trimming included
};

struct Channel {
  Place place;
  std::string name;
  std::string device;
  int input = 0;                             ///< as numbered on the wire
  CircuitKind circuit = CircuitKind::quarter_3_wire;
  bool sensed = false;                       ///< excitation sensed at the gauge (6-wire)
  std::string gauge;                         ///< key of Rack::gauges; empty for a transducer
  /// Gauge resistance as measured on the specimen, if it was: value and expanded uncertainty as fraction.
  std::optional<Toleranced> measuredResistance;
  std::array<std::optional<ArmGauge>, 4> arms;  ///< index 0..3: arms 1..4
  double poisson = 0.3;
  std::optional<TransducerSheet> transducer;
  std::map<Terminal, Lead> leads;            ///< exactly the circuit's leads
  std::optional<units::Resistance> completion;  ///< which of the profile's; quarter bridges and half_opposite
  units::Voltage excitation = 5.0 * units::volt;
  LeadLoss leadLoss = LeadLoss::in_prediction;
  Unbalance unbalance = Unbalance::unknown;
  bool loadControl = false;                  ///< feeds a controller: a shunt on it moves the actuator
  std::optional<units::Strain> expected;     ///< largest strain expected in the test
  std::string temperature;                   ///< channel that shows the gauge's temperature; empty: none
  /// Of the gauge when the zero was taken; none: what the temperature channel showed then.
  std::optional<units::Temperature> zeroTemperature;
  std::optional<double> fieldRatio;          ///< strain across the grid over strain along it, where it is known
  std::string group;                         ///< free text: "rosette R1", "mid-span"
  std::vector<Shunt> shunts;                 ///< may be empty: the channel is recorded, not calibrated
};

/// Verdict limits. Defaults are common practice, no source.
struct Limits {
  units::Fraction spanDeviation = 2.0 * units::percent;        ///< |span ratio - 1|
  units::Strain zeroReturn = 10.0 * units::microstrain;        ///< |return - before|
  units::Strain noise = 5.0 * units::microstrain;              ///< standard deviation of a sample
  units::Fraction repeatability = 0.5 * units::percent;        ///< spread of repeated steps
  units::Ratio unbalance = 2.0 * units::millivolt_per_volt;    ///< |before|
  units::Fraction linearity = 0.5 * units::percent;  ///< worst |residual| of several shunts, of the largest step
  units::Fraction leadDeviation = 20.0 * units::percent;  ///< identified lead resistance against the stated one
  /// Counts each figure's expanded uncertainty against it, so that a pass is one with the uncertainty counted (JCGM
  /// 106: guarded acceptance, guard band of one expanded uncertainty).
  bool guardBand = false;
};

struct CalibrationSettings {
  int windowSamples = 32;               ///< samples averaged for one reading
  int repeats = 2;                      ///< before/shunt/after cycles of each shunt
  Nanoseconds settleLimit = std::chrono::seconds(5);  ///< give up waiting for a steady reading
};

/// One bench.
struct Rack {
  std::string file;
  std::string text;
  std::string name;
  std::string title;
  std::vector<Device> devices;
  std::map<std::string, GaugeSheet> gauges;
  std::map<std::string, Resistor> resistors;
  std::vector<Channel> channels;
  std::vector<Rosette> rosettes;
  std::vector<Pair> pairs;
  Limits limits;
  CalibrationSettings calibration;

  const Device* device(const std::string& name) const;
  const Channel* channel(const std::string& name) const;
  const GaugeSheet& gaugeOf(const Channel& channel) const;  ///< channel.gauge must not be empty
  /// The gauge in one arm (0..3): the arm's own figures, else the channel's measured resistance, else the sheet's.
  GaugeOfArm gaugeOf(const Channel& channel, std::size_t arm) const;
  const Resistor& resistorOf(const Shunt& shunt) const;
};

}  // namespace shuntwright::description
