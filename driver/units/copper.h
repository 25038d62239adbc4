#pragma once

#include "driver/units/units.h"

namespace shuntwright::units {

/// Copper's temperature coefficient of resistance at 20 degC (IEC 60028: annealed copper, 0.00393 /K).
inline constexpr TemperatureCoefficient kCopperCoefficient = 0.00393 * per_kelvin;

/// Resistance of one solid annealed-copper lead.
/// R20 = length / (58 MS/m x area), IEC 60028; area from the AWG number n: d = 0.127 mm x 92^((36-n)/39)
/// (ASTM B258); R(t) = R20 (1 + 0.00393 (t - 20)).
/// @param awg wire number, 0 to 40.
Resistance copperLead(Length length, int awg, Temperature temperature);

/// A copper resistance known at one temperature, moved to another.
Resistance copperAt(Resistance known, Temperature at, Temperature wanted);

}  // namespace shuntwright::units
