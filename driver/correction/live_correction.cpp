#include "driver/correction/live_correction.h"

#include <limits>

#include "driver/calibration/basis.h"

namespace shuntwright::correction {

namespace {

std::vector<Coefficients> coefficientsOf(const std::vector<Column>& columns) {
  std::vector<Coefficients> out;
  for (const auto& column : columns) {
    Coefficients k;
    if (column.channel.empty() || column.map.p == 0) {
      k.p = std::numeric_limits<float>::quiet_NaN();
    } else {
      k.p = static_cast<float>(column.map.p * column.unitsPerStrain);
      k.c = static_cast<float>(-column.map.q / column.map.p);
      k.w = static_cast<float>(column.map.w);
      double unit = 1;  // of the shown value, by the power of u that each coefficient goes with
      for (std::size_t b = 0; b < k.bend.size(); ++b) {
        unit *= column.unitsPerStrain;
        k.bend[b] = static_cast<float>(column.map.bend[b] / unit);
      }
    }
    out.push_back(k);
  }
  return out;
}

}  // namespace

LiveCorrection::LiveCorrection(std::string device, std::vector<Column> columns)
    : device_(std::move(device)), columns_(std::move(columns)), kernel_(coefficientsOf(columns_)) {}

Result<LiveCorrection> LiveCorrection::of(const description::Rack& rack, const calibration::Record& record,
                                          const std::string& device) {
  const auto* described = rack.device(device);
  if (!described || !described->profile->inputs) {
    return fail(ErrorCode::bad_use, "device " + device + " has no inputs to correct", rack.file);
  }
  const auto& inputs = *described->profile->inputs;
  std::vector<Column> columns(static_cast<std::size_t>(inputs.count));
  for (const auto& channel : rack.channels) {
    if (channel.device != device) continue;
    if (auto holds = calibration::stillHolds(record, rack, channel); !holds) {
      return std::unexpected(std::move(holds.error()));
    }
    const auto* result = record.channel(channel.name);
    Column& column = columns[static_cast<std::size_t>(channel.input - inputs.first)];
    column.channel = channel.name;
    column.unit = result->unit;
    column.calibrated = result->verdict == calibration::Verdict::pass;
    column.map = result->correction;
    column.unitsPerStrain = result->unitsPerStrain;
  }
  return LiveCorrection(device, std::move(columns));
}

void LiveCorrection::apply(const device::SampleBlock& block, std::span<float> corrected) const {
  kernel_.apply(block.ratio.data(), corrected.data(), block.frames());
}

}  // namespace shuntwright::correction
