#include "driver/calibration/lead_readings.h"

#include <cmath>

#include "driver/calibration/linearity.h"

namespace shuntwright::calibration {

using namespace units;
using description::Channel;
using description::Rack;

LeadReadings leadReadingsOf(const Rack& rack, const Channel& channel, const std::vector<Ratio>& steps,
                            const std::vector<Ratio>& noise, Ratio zero, Ratio zeroNoise) {
  LeadReadings out;
  out.nominal = modelWithLeads(rack, channel);
  for (const auto& shunt : channel.shunts) out.resistors.push_back(shunt.resistor);
  out.steps = steps;
  out.noise = noise;
  out.zero = zero;
  const double offset = rack.device(channel.device)->profile->inputs->zeroOffset.in(volt_per_volt);
  const double least = resolutionOfStep({}).in(volt_per_volt);
  out.zeroNoise =
      std::max(least, std::hypot(offset / std::sqrt(3.0), zeroNoise.in(volt_per_volt))) * volt_per_volt;
  for (auto& in : inputsOf(rack, channel)) {
    if (!in.input.quantity.starts_with("lead ")) out.known.push_back(std::move(in));
  }
  for (const auto& [terminal, lead] : channel.leads) out.inequality[terminal] = lead.tolerance;
  return out;
}

Result<LeadFit> leadFitToCome(const Rack& rack, const Channel& channel) {
  const ChannelModel model = modelWithLeads(rack, channel);
  const auto zero = bridge::ratio(model.atCalibration, {});
  if (!zero) return std::unexpected(zero.error());
  const auto prediction = predictScale(model, *zero);
  if (!prediction) return std::unexpected(prediction.error());
  const Ratio digit = resolutionOfStep(rack.device(channel.device)->profile->inputs->resolution);
  return LeadFit::of(leadReadingsOf(rack, channel, prediction->steps,
                                    std::vector<Ratio>(prediction->steps.size(), digit), *zero, digit));
}

}  // namespace shuntwright::calibration
