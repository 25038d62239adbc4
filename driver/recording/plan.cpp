#include "driver/recording/plan.h"

#include <limits>

namespace shuntwright::recording {

RecordingPlan planOf(const description::Rack& rack, const calibration::Record& record, std::string recordJson,
                     const std::vector<correction::LiveCorrection>& corrections, Instant started,
                     const correction::DerivedChannels& derived) {
  RecordingPlan plan;
  plan.software = "shuntwright " SHUNTWRIGHT_VERSION;
  plan.rackName = rack.name;
  plan.rackText = rack.text;
  plan.calibrationId = record.id;
  plan.calibrationJson = std::move(recordJson);
  plan.started = started;
  for (std::size_t d = 0; d < corrections.size(); ++d) {
    const auto& correction = corrections[d];
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
                                 column.map.q, column.map.w, column.unitsPerStrain, column.map.bend});
    }
    constexpr double kNone = std::numeric_limits<double>::quiet_NaN();
    auto place = static_cast<int>(columns.size());
    for (const auto& column : derived.columns(d)) {
      device.channels.push_back({column.name, column.unit, place++, column.calibrated, kNone, kNone, kNone});
    }
    plan.devices.push_back(std::move(device));
  }
  return plan;
}

}  // namespace shuntwright::recording
