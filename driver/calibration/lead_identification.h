#pragma once

#include <optional>
#include <string>
#include <vector>

#include "driver/calibration/lead_fit.h"

namespace shuntwright::calibration {

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
  /// Of steps that fit leads and span this badly or worse if all is as stated; 1 where two steps always fit.
  double probability = 1;
};

/// Turns the fit into an interval, a verdict and an advice. The advice tries each input known to 0.01 % (a
/// lead against the others to 0.2 %), and each resistor switched to each other pair of terminals at the
/// instrument.
LeadIdentification identified(const LeadFit& fit);

}  // namespace shuntwright::calibration
