#pragma once

#include "driver/description/thermal_output.h"
#include "driver/units/units.h"

namespace shuntwright::mechanics {

/// How a bonded gauge departs from its room-temperature sheet.
struct ThermalBehaviour {
  description::ThermalOutput output;          ///< no coefficients: none
  units::TemperatureCoefficient factorSlope;  ///< relative change of the gauge factor per kelvin
  units::Temperature factorTemperature = units::Temperature::celsius(24);  ///< where the sheet's factor holds
};

/// Thermal output as a channel that uses `used` as its gauge factor shows it, counted from the zero balance:
/// (K_sheet / K_used) (P(now) - P(zero)). The sheet's polynomial says dR/R = K_sheet P(t), whatever
/// instrument reads it.
units::Strain thermalOutput(const description::ThermalOutput& output, units::GaugeFactor used,
                            units::Temperature now, units::Temperature zero);

/// K(t) = K (1 + slope (t - factorTemperature)).
units::GaugeFactor factorAt(units::GaugeFactor sheet, const ThermalBehaviour& behaviour,
                            units::Temperature now);

/// Strain of the specimen under load from the strain shown by a channel that uses the sheet's factor at all
/// temperatures. dR/R = K(t) strain + K_sheet (P(t) - P(zero)), solved for the strain: the thermal output is
/// taken away at the channel's factor first, then the rest is rescaled by K / K(t). A bridge whose adjacent
/// arm is a dummy gauge at the same temperature cancels its thermal output itself: give `behaviour` no
/// coefficients then.
units::Strain withoutThermalEffects(units::Strain shown, units::GaugeFactor used,
                                    const ThermalBehaviour& behaviour, units::Temperature now,
                                    units::Temperature zero);

}  // namespace shuntwright::mechanics
