#include "driver/recording/plan.h"

namespace shuntwright::recording {

RecordingPlan planOf(const description::Rack& rack, const calibration::Record& record, std::string recordJson,
                     const std::vector<correction::LiveCorrection>& corrections, Instant started) {
  RecordingPlan plan;
  plan.software = "shuntwright " SHUNTWRIGHT_VERSION;
  plan.rackName = rack.name;
  plan.rackText = rack.text;
  plan.calibrationId = record.id;
  plan.calibrationJson = std::move(recordJson);
  plan.started = started;
  for (const auto& correction : corrections) {
    const auto& described = *rack.device(correction.device());
    RecordedDevice device;
    device.name = correction.device();
    const auto& rates = described.profile->inputs->rates;
    device.rate_Hz = described.rate ? described.rate->in(units::hertz)
                                    : (rates.empty() ? 10 : rates.front().in(units::hertz));
    const auto& columns = correction.columns();
    for (std::size_t k = 0; k < columns.size(); ++k) {
      const auto& column = columns[k];
      if (column.channel.empty()) continue;
      device.channels.push_back({column.channel, column.unit, static_cast<int>(k), column.calibrated, column.map.p,
                                 column.map.q, column.map.w, column.unitsPerStrain});
    }
    plan.devices.push_back(std::move(device));
  }
  return plan;
}

}  // namespace shuntwright::recording
