#pragma once

#include "driver/core/error.h"
#include "driver/units/units.h"

namespace shuntwright::mechanics {

/// Letter-designated thermocouples (IEC 60584, ITS-90 reference functions of NIST Monograph 175).
enum class ThermocoupleType { J, K, T };

/// EMF with the reference junction at 0 degC. Range: J -210..1200, K -270..1372, T -270..400 degC.
/// Errors: bad_use beyond the range.
Result<units::Voltage> thermocoupleVoltage(ThermocoupleType type, units::Temperature t);

/// Temperature of the measuring junction: the EMF of the reference junction is added to what is measured, and
/// the reference function inverted exactly, not by the tabulated approximate inverse. Errors: bad_use when
/// the sum lies beyond the type's range (an open or reversed couple), below -250 degC for K and T (nearly
/// flat there), or when the reference junction itself does.
Result<units::Temperature> thermocoupleTemperature(ThermocoupleType type, units::Voltage measured,
                                                   units::Temperature referenceJunction);

}  // namespace shuntwright::mechanics
