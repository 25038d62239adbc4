#pragma once

#include "driver/bridge/circuit.h"

namespace shuntwright::bridge {

/// strain = (p r + q) / (1 + w r), r in V/V, strain in m/m (for a transducer: fraction of rated value).
/// Exact whenever r is a Moebius function of the strain: one active unknown, or nominal symmetric circuits.
struct RationalMap {
  double p = 0;
  double q = 0;
  double w = 0;

  double strainAt(double ratio_V_per_V) const { return (p * ratio_V_per_V + q) / (1 + w * ratio_V_per_V); }

  /// The map for a reading taken through an amplifier: r_true = (reading - offset) / span.
  RationalMap afterAmplifier(double span, double offset) const;
  /// The map whose strain is 0 at this reading: zero is subtracted in strain, not in ratio.
  RationalMap zeroedAt(double ratio_V_per_V) const;
};

struct FittedMap {
  RationalMap map;
  units::Strain worstError;  ///< largest |map - truth| over the range, searched on a dense grid; rounding
                             ///< only when exact
  units::Strain range;       ///< half-width the error was searched over
};

/// The circuit's map about `centre`, through three states of the exact network, and how far it is off
/// anywhere within +-range of it.
Result<FittedMap> mapOf(const Circuit& circuit, units::Strain centre = {},
                        units::Strain range = 20000.0 * units::microstrain);

/// The strain at which the circuit shows this ratio, by the exact network (refined until the ratio agrees to
/// rounding). Errors: bad_use when no strain in +-100 000 microstrain (a transducer: +-10 times the rated
/// value) gives it.
Result<units::Strain> strainOf(const Circuit& circuit, units::Ratio ratio);

}  // namespace shuntwright::bridge
