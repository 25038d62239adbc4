#pragma once

#include <array>

#include "driver/bridge/circuit.h"

namespace shuntwright::bridge {

/// strain = u + b2 u^2 + b3 u^3 + b4 u^4 + b5 u^5 with u = (p r + q) / (1 + w r); r in V/V, strain in m/m (for
/// a transducer: fraction of rated value).
///
/// With all b = 0 it is exact whenever r is a Moebius function of the strain: one active unknown, or nominal
/// symmetric circuits. Elsewhere (several gauges of unequal resistance or factor, bending with Poisson gauges)
/// the ratio is a quotient of polynomials of a higher degree and the b take up what Moebius leaves.
struct RationalMap {
  double p = 0;
  double q = 0;
  double w = 0;
  std::array<double, 4> bend{};  ///< b2, b3, b4, b5

  bool isMoebius() const { return bend == std::array<double, 4>{}; }
  double strainAt(double ratio_V_per_V) const;

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

/// The circuit's map about `centre`, through three states of the exact network, bent through four more where
/// three do not make it exact, and how far it is off anywhere within +-range of the centre.
Result<FittedMap> mapOf(const Circuit& circuit, units::Strain centre = {},
                        units::Strain range = 20000.0 * units::microstrain);

/// The strain at which the circuit shows this ratio, by the exact network (refined until the ratio agrees to
/// rounding). Errors: bad_use when no strain in +-100 000 microstrain (a transducer: +-10 times the rated
/// value) gives it.
Result<units::Strain> strainOf(const Circuit& circuit, units::Ratio ratio);

}  // namespace shuntwright::bridge
