#include <cmath>

#include "driver/description/readers.h"

namespace shuntwright::description {
namespace {

class ArmReader {
 public:
  ArmReader(const TomlEntry& entry, std::size_t arm, const Channel& channel, Diagnostics& diagnostics)
      : reader_(entry.value, "arm " + entry.key + " of channel \"" + channel.name + '"', diagnostics),
        arm_(arm),
        channel_(channel),
        diagnostics_(diagnostics) {}

  ArmGauge read(const Rack& rack) {
    ArmGauge out;
    readResistance(rack, out);
    reader_.take("factor", out.factor, {"0.5", "200"});
    const bool toleranced = reader_.take("factor_tolerance", out.factorTolerance, {"0 %", "20 %"});
    if (toleranced && !reader_.has("factor"))
      diagnostics_.error(reader_.entry("factor_tolerance")->place,
                         "a tolerance without the factor it belongs to",
                         "add factor = 2.08, or take it out: the gauge's own tolerance holds");
    reader_.finish();
    return out;
  }

 private:
  void readResistance(const Rack& rack, ArmGauge& out) {
    if (!reader_.has("resistance")) {
      if (reader_.has("uncertainty"))
        diagnostics_.error(reader_.entry("uncertainty")->place,
                           "an uncertainty without the resistance it belongs to",
                           "add resistance = \"350.4 ohm\"");
      return;
    }
    Toleranced measured;
    const bool valued = reader_.take("resistance", measured.value, {"10 ohm", "100 kohm"});
    const bool uncertain = reader_.need("uncertainty", measured.tolerance, {"0 %", "5 %"}, "\"0.02 %\"");
    if (!valued || !uncertain) return;
    out.resistance = measured;
    const TomlEntry& entry = *reader_.entry("resistance");
    if (arm_ == 0 && channel_.measuredResistance)
      diagnostics_.error(entry.place,
                         "the resistance of arm 1 is given twice: here and by \"gauge_resistance\"",
                         "keep one of the two");
    const auto sheet = rack.gauges.find(channel_.gauge);
    if (sheet == rack.gauges.end()) return;
    const units::Resistance nominal = sheet->second.resistance.value;
    if (std::abs(measured.value / nominal - 1) > 0.05)
      diagnostics_.warning(entry.value.place,
                           "the measured resistance of " + reader_.what() + ", " + show(measured.value) +
                               ", is more than 5 % off the nominal " + show(nominal),
                           "check the reading and the gauge's name");
  }

  TableReader reader_;
  std::size_t arm_;
  const Channel& channel_;
  Diagnostics& diagnostics_;
};

}  // namespace

void readArms(const TomlNode& table, const Rack& rack, Channel& channel, Diagnostics& diagnostics) {
  const auto weights = armWeights(channel.circuit, 0.3);  // 0: no gauge, whatever Poisson's ratio
  std::string gauges;
  for (std::size_t i = 0; i < weights.size(); ++i) {
    if (weights[i] != 0) gauges += (gauges.empty() ? "" : ", ") + std::to_string(i + 1);
  }
  for (const TomlEntry& entry : table.entries) {
    const bool isArm = entry.key.size() == 1 && entry.key[0] >= '1' && entry.key[0] <= '4';
    const std::size_t arm = isArm ? static_cast<std::size_t>(entry.key[0] - '1') : 0;
    if (!isArm || weights[arm] == 0) {
      if (entry.inherited) continue;
      diagnostics.error(
          entry.place,
          isArm ? "arm " + entry.key + " of a " + std::string(name(channel.circuit)) + " is no gauge"
                : "a bridge has no arm \"" + entry.key + '"',
          "its gauges are in arms " + gauges);
      continue;
    }
    if (entry.value.type != TomlNode::Type::table) {
      diagnostics.error(
          entry.value.place, "arm " + entry.key + " must be a table",
          "write it like " + entry.key + " = { resistance = \"350.4 ohm\", uncertainty = \"0.02 %\" }");
      continue;
    }
    channel.arms[arm] = ArmReader(entry, arm, channel, diagnostics).read(rack);
  }
}

}  // namespace shuntwright::description
