#include <map>
#include <set>
#include <string>

#include "driver/description/readers.h"

namespace shuntwright::description {
namespace {

std::string inQuotes(std::string_view text) {
  return '"' + std::string(text) + '"';
}

bool isQuarter(const Channel& channel) {
  return channel.circuit == CircuitKind::quarter_2_wire || channel.circuit == CircuitKind::quarter_3_wire;
}

class SpotReader {
 public:
  SpotReader(TableReader& root, Rack& rack, Diagnostics& diagnostics)
      : root_(root), rack_(rack), diagnostics_(diagnostics) {}

  void read() {
    for (const TomlNode* table : root_.tables("rosette")) readRosette(*table);
    for (const TomlNode* table : root_.tables("pair")) readPair(*table);
    for (const Channel& channel : rack_.channels) checkTemperature(channel);
  }

 private:
  void readRosette(const TomlNode& table) {
    Rosette out;
    out.place = table.place;
    TableReader reader(table, titled("rosette", table), diagnostics_);
    nameOf(reader, out.name);
    const bool known = reader.has("layout") || reader.neededEntry("layout", "\"rectangular\"");
    const bool chosen = known && reader.choose("layout", out.layout,
                                               {{"rectangular", RosetteLayout::rectangular},
                                                {"delta", RosetteLayout::delta},
                                                {"tee", RosetteLayout::tee}});
    const bool listed = reader.neededEntry("channels", "[\"R1-a\", \"R1-b\", \"R1-c\"]") &&
                        reader.takeList("channels", out.channels);
    reader.need("modulus", out.modulus, {"1 MPa", "2000 GPa"}, "\"210 GPa\"");
    reader.need("poisson", out.poisson, {"0", "0.499"}, "0.3");
    reader.finish();
    if (!chosen || !listed) return;
    const std::size_t wanted = gaugesOf(out.layout);
    if (!checkGauges(reader, out.channels, wanted)) return;
    for (const std::string& name : out.channels) {
      const auto [other, first] = rosetteOf_.emplace(name, out.name);
      if (!first) {
        diagnostics_.error(
            listPlace(reader), "channel " + inQuotes(name) + " is named twice by rosettes",
            "each gauge belongs to one rosette, once; it is in " + inQuotes(other->second) + " already");
      }
      const Channel& channel = *rack_.channel(name);
      if (channel.fieldRatio) {
        diagnostics_.error(channel.place,
                           "channel " + inQuotes(name) + " has a \"field_ratio\" and is part of rosette " +
                               inQuotes(out.name),
                           "take \"field_ratio\" out: the rosette measures the field");
      }
    }
    rack_.rosettes.push_back(std::move(out));
  }

  void readPair(const TomlNode& table) {
    Pair out;
    out.place = table.place;
    TableReader reader(table, titled("pair", table), diagnostics_);
    nameOf(reader, out.name);
    const bool listed =
        reader.neededEntry("channels", "[\"top\", \"bottom\"]") && reader.takeList("channels", out.channels);
    reader.take("first_part", out.firstPart, {"0", "1"});
    reader.finish();
    if (listed && checkGauges(reader, out.channels, 2)) rack_.pairs.push_back(std::move(out));
  }

  /// Rosettes and pairs give columns of their own, beside those of channels.
  void nameOf(TableReader& reader, std::string& out) {
    if (!readName(reader, out, diagnostics_)) return;
    if (rack_.channel(out) || !names_.insert(out).second) {
      diagnostics_.error(reader.entry("name")->value.place, "the name " + inQuotes(out) + " is taken",
                         "give each channel, rosette and pair a name of its own");
    }
  }

  /// As many channels as wanted, all there, each a gauge with a bridge to itself, all on one device.
  bool checkGauges(TableReader& reader, const std::vector<std::string>& names, std::size_t wanted) {
    const Place& place = listPlace(reader);
    if (names.size() != wanted) {
      diagnostics_.error(place,
                         reader.what() + " names " + std::to_string(names.size()) + " channels and has " +
                             std::to_string(wanted) + " gauges",
                         "name them in the order of their angles");
      return false;
    }
    const Channel* first = nullptr;
    for (const std::string& name : names) {
      const Channel* channel = rack_.channel(name);
      if (!channel) {
        diagnostics_.error(place, "no channel is called " + inQuotes(name),
                           suggestion(name, namesOf(rack_.channels)));
        return false;
      }
      if (!isQuarter(*channel)) {
        diagnostics_.error(place,
                           "channel " + inQuotes(name) + " is a " +
                               std::string(description::name(channel->circuit)) + " circuit",
                           "each gauge needs a quarter bridge of its own here");
        return false;
      }
      if (!first) first = channel;
      if (channel->device != first->device) {
        diagnostics_.error(
            place,
            "channels " + inQuotes(first->name) + " and " + inQuotes(name) + " are on different devices",
            "their samples are not of one time; put them on one device");
        return false;
      }
    }
    return true;
  }

  void checkTemperature(const Channel& channel) {
    if (channel.temperature.empty()) {
      if (channel.zeroTemperature) {
        diagnostics_.error(
            channel.place,
            "channel " + inQuotes(channel.name) + " has a \"zero_temperature\" and no \"temperature\"",
            "name the channel that shows the gauge's temperature");
      }
      return;
    }
    const Channel* thermometer = rack_.channel(channel.temperature);
    if (!thermometer) {
      diagnostics_.error(channel.place, "no channel is called " + inQuotes(channel.temperature),
                         suggestion(channel.temperature, namesOf(rack_.channels)));
      return;
    }
    if (!thermometer->transducer || thermometer->transducer->unit != "degC" || !thermometer->shunts.empty()) {
      diagnostics_.error(channel.place, "channel " + inQuotes(channel.temperature) + " shows no temperature",
                         "it has to be a transducer with unit = \"degC\" and no shunts");
      return;
    }
    const auto sheet = rack_.gauges.find(channel.gauge);
    if (sheet == rack_.gauges.end()) return;
    if (!sheet->second.thermalOutput && sheet->second.factorSlope.in(units::per_kelvin) == 0) {
      diagnostics_.warning(channel.place,
                           "the temperature of channel " + inQuotes(channel.name) + " has no effect: gauge " +
                               inQuotes(channel.gauge) +
                               " has neither \"thermal_output\" nor \"factor_slope\"",
                           "give them from the gauge's packet");
    }
  }

  static const Place& listPlace(TableReader& reader) { return reader.entry("channels")->value.place; }

  static std::string titled(std::string_view kind, const TomlNode& table) {
    const TomlEntry* entry = table.find("name");
    return std::string(kind) + (entry && !entry->value.text.empty() ? ' ' + inQuotes(entry->value.text) : "");
  }

  TableReader& root_;
  Rack& rack_;
  Diagnostics& diagnostics_;
  std::map<std::string, std::string> rosetteOf_;  ///< channel -> rosette
  std::set<std::string> names_;
};

}  // namespace

void readGaugeEffects(TableReader& reader, GaugeSheet& gauge, Diagnostics& diagnostics) {
  if (const TomlNode* table = reader.table("thermal_output")) {
    ThermalOutput out;
    TableReader inner(*table, "\"thermal_output\"", diagnostics);
    const bool listed = inner.neededEntry("coefficients", "[-31.8, 2.77, -0.0655, 3.28e-4, -3.26e-7]") &&
                        inner.takeList("coefficients", out.coefficients_microstrain, {"-1e6", "1e6"});
    const bool factored = inner.need("factor", out.factor, {"0.5", "200"}, "2.0");
    inner.finish();
    if (listed && (out.coefficients_microstrain.empty() || out.coefficients_microstrain.size() > 8)) {
      diagnostics.error(inner.entry("coefficients")->value.place,
                        "a thermal output has one to eight coefficients",
                        "give microstrain over powers of degC, the constant first");
    } else if (listed && factored) {
      gauge.thermalOutput = std::move(out);
    }
  }
  reader.take("factor_slope", gauge.factorSlope, {"-1 %/K", "1 %/K"});
  reader.take("factor_temperature", gauge.factorTemperature, {"-270 degC", "1000 degC"});
  reader.take("transverse_sensitivity", gauge.transverseSensitivity, {"-10 %", "10 %"});
  reader.take("transverse_poisson", gauge.transversePoisson, {"0", "0.5"});
}

void readChannelEffects(TableReader& reader, Channel& channel) {
  reader.take("temperature", channel.temperature);
  reader.take("zero_temperature", channel.zeroTemperature, {"-270 degC", "1000 degC"});
  reader.take("field_ratio", channel.fieldRatio, {"-10", "10"});
}

void readSpots(TableReader& root, Rack& rack, Diagnostics& diagnostics) {
  SpotReader(root, rack, diagnostics).read();
}

}  // namespace shuntwright::description
