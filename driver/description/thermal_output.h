#pragma once

#include <vector>

#include "driver/units/units.h"

namespace shuntwright::description {

/// What a gauge reads on its unloaded specimen when the temperature changes, as the packet gives it.
struct ThermalOutput {
  /// c0, c1, c2, ...: microstrain = c0 + c1 t + c2 t^2 + ..., t in degC.
  std::vector<double> coefficients_microstrain;
  /// The gauge factor that the maker's instrument was set to; often not the packet's own factor.
  units::GaugeFactor factor;
};

}  // namespace shuntwright::description
