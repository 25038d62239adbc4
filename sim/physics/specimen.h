#pragma once

#include <map>
#include <string>

#include "driver/core/clock.h"
#include "driver/core/random.h"
#include "driver/description/rack.h"
#include "sim/fault/scenario.h"

namespace shuntwright::sim {

/// The load at a time since the load test began: straight ramps between held levels, 0 before and after.
double loadPart(const Scenario& scenario, double seconds);  ///< of the largest load, 0 to 1

/// Strain of a simply supported beam with a load F at mid-span, by bending theory: M(x) = F x / 2 for x <= L/2
/// (mirrored beyond), e = M c / (E I), transverse strain -nu e. On the web the shear force V = F/2 (reversed beyond
/// mid-span) adds the mean shear strain g = V / (G A_web), G = E / (2 (1 + nu)). At an angle a to the axis, by the
/// transformation of plane strain: e(a) = e cos^2 a - nu e sin^2 a + g sin a cos a.
double beamStrain(const Beam& beam, const GaugePlace& place, units::Force load);

/// What the beam does to the channels of a rack.
class Specimen {
 public:
  Specimen(const description::Rack& rack, const Scenario& scenario, Random random);

  units::Temperature temperature(double time_s) const;

  /// The truth: strain along the grid that the load makes, or the fraction of a transducer's rated value.
  double loadStrainOf(const description::Channel& channel, double loadTime_s, double time_s) const;

  /// What the gauge answers with, as strain at its sheet's factor: beside the truth the strain across its grid, its
  /// factor at the beam's temperature and, where its circuit does not cancel it, its thermal output. The packet's
  /// figures are taken as true; the transverse effect is that of single gauges with a place on the beam.
  /// @param loadTime_s  since the load test began; negative: it has not
  /// @param time_s      since the start of everything
  double strainOf(const description::Channel& channel, double loadTime_s, double time_s) const;

 private:
  const Scenario scenario_;
  std::map<std::string, double> followers_;  ///< channels without a place: strain at full load
  std::map<std::string, description::GaugeSheet> packets_;  ///< by channel
};

}  // namespace shuntwright::sim
