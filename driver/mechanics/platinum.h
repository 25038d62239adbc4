#pragma once

#include "driver/core/error.h"
#include "driver/units/units.h"

namespace shuntwright::mechanics {

/// Platinum resistance thermometer (IEC 60751), -200 to 850 degC:
/// R(t) = R0 (1 + A t + B t^2 + C (t - 100) t^3), the last term below 0 degC only.
/// @param atZero  R0, at 0 degC: 100 ohm for a PT100.
/// Errors: bad_use beyond the standard's range.
Result<units::Resistance> platinumResistance(units::Temperature t,
                                             units::Resistance atZero = 100.0 * units::ohm);

/// Its inverse, exact to rounding: the quadratic above 0 degC, Newton's steps below.
/// Errors: bad_use beyond the standard's range (an open or shorted element).
Result<units::Temperature> platinumTemperature(units::Resistance r,
                                               units::Resistance atZero = 100.0 * units::ohm);

}  // namespace shuntwright::mechanics
