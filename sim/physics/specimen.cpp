#include "sim/physics/specimen.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace shuntwright::sim {

using namespace units;

double loadPart(const Scenario& scenario, double time_s) {
  if (time_s <= 0) return 0;
  const double ramp_s = seconds(scenario.ramp), hold_s = seconds(scenario.hold);
  double from = 0;
  for (const double level : scenario.levels) {
    if (time_s < ramp_s) return from + (level - from) * time_s / ramp_s;
    time_s -= ramp_s;
    if (time_s < hold_s) return level;
    time_s -= hold_s;
    from = level;
  }
  return from;
}

double beamStrain(const Beam& beam, const GaugePlace& place, Force load) {
  const double length_m = beam.span.in(metre);
  const double x_m = std::clamp(place.alongBeam.in(metre), 0.0, length_m);
  const double moment_Nm = load.in(newton) / 2 * std::min(x_m, length_m - x_m);
  const double axial = moment_Nm * place.fibre.in(metre) / (beam.modulus.in(pascal) * beam.secondMoment_m4);
  const double angle = place.angle_deg * std::numbers::pi / 180;
  const double cosine = std::cos(angle), sine = std::sin(angle);
  double shear = 0;
  if (place.web) {
    const double force_N = (x_m < length_m / 2 ? 0.5 : x_m > length_m / 2 ? -0.5 : 0) * load.in(newton);
    const double shearModulus_Pa = beam.modulus.in(pascal) / (2 * (1 + beam.poisson));
    shear = force_N / (shearModulus_Pa * beam.webArea.in(square_metre));
  }
  return axial * (cosine * cosine - beam.poisson * sine * sine) + shear * sine * cosine;
}

Specimen::Specimen(const description::Rack& rack, const Scenario& scenario, Random random) : scenario_(scenario) {
  for (const auto& channel : rack.channels) {
    const double share = random.uniform(0.8, 1.0);
    followers_[channel.name] = channel.expected ? share * channel.expected->in(strain) : share * 500e-6;
    if (!channel.gauge.empty()) packets_[channel.name] = rack.gaugeOf(channel);
  }
}

Temperature Specimen::temperature(double time_s) const {
  const double risen = 1 - std::exp(-std::max(0.0, time_s) / seconds(scenario_.beam.warmingTime));
  return scenario_.beam.temperature + risen * scenario_.beam.warming;
}

double Specimen::loadStrainOf(const description::Channel& channel, double loadTime_s, double time_s) const {
  const double part = loadPart(scenario_, loadTime_s);
  if (channel.transducer) {
    const auto& sheet = *channel.transducer;
    // A thermometer sees the beam warm up; anything else sees the load.
    if (sheet.unit == "degC") return temperature(time_s).celsius() / sheet.ratedValue;
    return part * scenario_.maxLoad.in(sheet.unit == "N" ? newton : kilonewton) / sheet.ratedValue;
  }
  if (const auto place = scenario_.places.find(channel.name); place != scenario_.places.end()) {
    return beamStrain(scenario_.beam, place->second, part * scenario_.maxLoad);
  }
  return part * followers_.at(channel.name);
}

double Specimen::strainOf(const description::Channel& channel, double loadTime_s, double time_s) const {
  double seen = loadStrainOf(channel, loadTime_s, time_s);
  const auto found = packets_.find(channel.name);
  if (found == packets_.end()) return seen;
  const auto& packet = found->second;
  const auto kind = channel.circuit;
  const bool single = kind == description::CircuitKind::quarter_2_wire || kind == description::CircuitKind::quarter_3_wire;
  if (const auto place = scenario_.places.find(channel.name);
      single && packet.transverseSensitivity && place != scenario_.places.end()) {
    // dR/R = Ka e + Kq q, and the maker found K = Ka + Kq (-nu0) on his bar.
    auto across = place->second;
    across.angle_deg += 90;
    const double q = beamStrain(scenario_.beam, across, loadPart(scenario_, loadTime_s) * scenario_.maxLoad);
    const double axial = 1 / (1 - packet.transversePoisson * packet.transverseSensitivity->in(one));
    seen = axial * seen + axial * packet.transverseSensitivity->in(one) * q;
  }
  const double now_C = temperature(time_s).celsius();
  seen += seen * packet.factorSlope.in(per_kelvin) * (now_C - packet.factorTemperature.celsius());
  if (packet.thermalOutput && (single || kind == description::CircuitKind::half_opposite)) {
    double power = 1, microstrains = 0;
    for (const double c : packet.thermalOutput->coefficients_microstrain) {
      microstrains += c * power;
      power *= now_C;
    }
    seen += 1e-6 * microstrains * packet.thermalOutput->factor.value() / packet.factor.value();
  }
  return seen;
}

}  // namespace shuntwright::sim
