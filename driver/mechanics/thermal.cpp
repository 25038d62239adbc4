#include "driver/mechanics/thermal.h"

#include <ranges>

namespace shuntwright::mechanics {

using namespace units;

namespace {

double microstrainAt(const std::vector<double>& coefficients, Temperature t) {
  double sum = 0;
  for (const double c : std::views::reverse(coefficients)) sum = sum * t.celsius() + c;
  return sum;
}

}  // namespace

Strain thermalOutput(const description::ThermalOutput& output, GaugeFactor used, Temperature now,
                     Temperature zero) {
  const double sheet = microstrainAt(output.coefficients_microstrain, now) -
                       microstrainAt(output.coefficients_microstrain, zero);
  return sheet * output.factor.value() / used.value() * microstrain;
}

GaugeFactor factorAt(GaugeFactor sheet, const ThermalBehaviour& behaviour, Temperature now) {
  return GaugeFactor(sheet.value() *
                     (1 + (behaviour.factorSlope * (now - behaviour.factorTemperature)).in(one)));
}

Strain withoutThermalEffects(Strain shown, GaugeFactor used, const ThermalBehaviour& behaviour,
                             Temperature now, Temperature zero) {
  return (shown - thermalOutput(behaviour.output, used, now, zero)) *
         (used.value() / factorAt(used, behaviour, now).value());
}

}  // namespace shuntwright::mechanics
