#pragma once

#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "driver/bridge/rational_map.h"
#include "driver/core/clock.h"
#include "driver/description/rack.h"
#include "driver/units/units.h"

namespace shuntwright::calibration {

enum class Verdict { pass, fail, not_calibrated };
const char* name(Verdict verdict);  ///< "pass", "fail", "not calibrated"

/// Something that a person should know about a channel.
struct Finding {
  std::string code;      ///< "step-missing", "wrong-sign", "span-deviates", "noisy", "no-zero-return", "saturated", ...
  std::string message;
  std::string evidence;  ///< the figures behind it
};

/// One input of an uncertainty budget, as a quality manager reads it.
struct BudgetLine {
  std::string quantity;      ///< "shunt resistor RC350", "gauge resistance", "noise of the windows"
  double value = 0;
  std::string unit;
  std::string distribution;  ///< "normal", "rectangular"
  double standardUncertainty = 0;  ///< in `unit`
  double degreesOfFreedom = 0;     ///< infinity for type B
  double sensitivity = 0;          ///< percent of the result per `unit`
  double contribution_percent = 0; ///< |sensitivity| x standardUncertainty
};

struct Budget {
  std::vector<BudgetLine> lines;
  double standardUncertainty_percent = 0;
  double effectiveDegreesOfFreedom = 0;
  double coverageFactor = 2;
  double expandedUncertainty_percent = 0;  ///< at 95.45 %
};

/// One before / shunt / after measurement, the mean of its repeats. Ratios in V/V as read; NaN (null in JSON) what
/// was not measured because the relay would not work.
struct ShuntResult {
  std::string name;
  units::Ratio before, after, returned;  ///< "returned" is after the relay opened again
  units::Ratio measuredStep;             ///< drift removed (A-B-A)
  units::Ratio predictedStep;            ///< at the before state
  units::Ratio stepDeviation;            ///< standard deviation of the repeated steps; 0 for one repeat
  units::Ratio noise;                    ///< standard deviation of a sample
  units::Ratio residual;                 ///< measured - span x predicted
  // Expanded, 95.45 %; a guard band asks for them.
  units::Fraction deviationUncertainty;  ///< of measured / predicted, 1 being nominal
  units::Ratio returnUncertainty;        ///< of returned - before
  units::Ratio noiseUncertainty;         ///< of the noise
  bool measured() const;                 ///< there is a step
  Nanoseconds settling{0};               ///< longest time until a window was steady
  int repeats = 0;
};

/// One lead as the data show it.
struct IdentifiedLead {
  description::Terminal terminal;
  units::Resistance resistance;
  units::Resistance expandedUncertainty;
  bool toldApart = false;  ///< known better than by half of what the rack allows it to be off the others
};

/// What one input does to the identified resistance.
struct LeadContribution {
  std::string quantity;
  units::Resistance uncertainty;  ///< standard
};

/// The one reading that would narrow the lead resistance most, and to what.
struct LeadAdvice {
  std::string
      what;  ///< "know the completion resistor of arm 2 to 0.01 %", "switch RC to COMP and EXC- as well"
  units::Resistance expandedUncertainty;
};

/// Lead resistance and amplifier's span from shunts at the instrument, with no walk to the gauge.
struct LeadIdentification {
  /// Mean of the leads that carry the excitation's current; 95.45 %, the inputs' shapes convolved.
  units::Resistance resistance;
  units::Resistance expandedUncertainty;
  units::Resistance stated;  ///< what the rack said of them
  double span = 1;
  double spanStandardUncertainty = 0;
  double correlation = 0;  ///< of the common lead resistance with the span
  /// Of the whitened Jacobian for common resistance and span, columns scaled to 1, all else eliminated.
  double condition = 1;
  /// The interval is less than a tenth of the gauge's resistance either way; else the shunts do not tell
  /// leads from span, and the figures above mean nothing.
  bool identifiable = false;
  std::string reason;  ///< why not
  std::vector<IdentifiedLead> leads;
  std::vector<LeadContribution> budget;  ///< largest first
  std::optional<LeadAdvice> advice;      ///< nothing where no single reading takes off a tenth
  double degreesOfFreedom = 0;  ///< steps and zero beyond what is asked of them
  /// Of steps that fit leads and span this badly or worse if all is as stated; 1 where two steps always fit.
  double probability = 1;
};

/// How well a corrected strain is known at one level; 95.45 %.
struct StrainUncertainty {
  units::Strain level;
  units::Strain expanded;  ///< all that the chain can do to it
  units::Strain
      expandedWithFactor;  ///< the gauge factor's (a transducer: the sensitivity's) tolerance as well
};

/// How straight the chain is as several shunts show it, and whether they agree within what is stated of them.
struct Straightness {
  double worst_percent = 0;               ///< largest |residual|, in percent of the largest step
  double expandedUncertainty_percent = 0; ///< of that
  double chiSquared = 0, degreesOfFreedom = 0;
  double probability = 1;                 ///< of a chi-square this large or larger if all is as stated
};

/// What the rack said of a channel when it was calibrated, by name in words (basis.h).
using Basis = std::map<std::string, std::string>;

struct ChannelResult {
  std::string name;
  Basis basis;
  Verdict verdict = Verdict::not_calibrated;
  std::vector<Finding> findings;
  double spanRatio = 1;                  ///< measured / predicted
  Budget budget;                         ///< of the correction's scale: everything that a shunt can see
  std::optional<units::Resistance> leadResistance;      ///< as used: entered (mean of the leads) or identified
  std::optional<units::Resistance> leadUncertainty;     ///< expanded
  std::optional<LeadIdentification> leads;              ///< where they were to be identified
  units::Ratio zero;                     ///< reading at no load
  units::Ratio zeroReadingUncertainty;   ///< expanded, of that reading alone
  int lostSamples = 0;                   ///< frames lost or damaged inside the windows
  std::vector<ShuntResult> shunts;
  std::optional<Straightness> straightness;  ///< with two measured shunts or more
  bridge::RationalMap correction;        ///< reading in V/V -> strain (or fraction of rated value), zeroed
  units::Strain worstMapError;           ///< of the correction's form against the exact circuit, within its range
  units::Strain zeroExpandedUncertainty; ///< how far the zero may move until the test
  std::vector<StrainUncertainty> strainUncertainty;  ///< at no load and at the largest strain expected
  double factorUncertainty_percent = 0;  ///< expanded, of the gauge factor alone: no shunt sees it
  std::string unit = "microstrain";      ///< what corrected values are shown in
  double unitsPerStrain = 1e6;           ///< shown value = corrected value x this (a transducer: rated value)
};

/// A device as it identified itself; empty what it did not say.
struct DeviceFound {
  std::string name, model, serialNumber;
};

/// Everything that one calibration found.
struct Record {
  std::string id;        ///< from the start time and the seed or a random source: "20260504-093000-7f3a"
  Instant started;
  std::string software;  ///< "shuntwright 0.1.0"
  std::string rackName;
  std::string rackFile;
  std::vector<DeviceFound> devices;
  std::vector<ChannelResult> channels;
  int windows = 0;       ///< readings taken
  Nanoseconds duration{0};
  std::optional<Instant> zeroed;  ///< the zeros in it were taken anew then; nothing: with the calibration
  std::vector<std::string> relaysMaybeClosed;  ///< that would not open; must be empty

  bool passed() const;   ///< no channel failed and no relay is left closed
  const ChannelResult* channel(const std::string& name) const;
};

}  // namespace shuntwright::calibration
