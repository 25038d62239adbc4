#include <algorithm>

#include "driver/description/readers.h"
#include "driver/units/copper.h"

namespace shuntwright::description {
namespace {

constexpr Bounds kResistanceRange{"0 ohm", "1 kohm"};
constexpr Bounds kLengthRange{"0 m", "5000 m"};

std::string list(const std::vector<Terminal>& terminals) {
  std::string out;
  for (const Terminal terminal : terminals) out += (out.empty() ? "" : ", ") + std::string(name(terminal));
  return out;
}

void takeConditions(TableReader& reader, Lead& lead) {
  reader.take("tolerance", lead.tolerance, {"0 %", "50 %"});
  reader.take("temperature", lead.temperature, {"-200 degC", "250 degC"});
  reader.take("temperature_tolerance", lead.temperatureTolerance, {"0 K", "200 K"});
}

/// The resistance of a lead by one of two ways: `resistanceKey`, or length and awg. False: neither is there.
/// What is given wrongly is reported and counts as given.
bool takeResistance(TableReader& reader, std::string_view resistanceKey, Lead& lead,
                    Diagnostics& diagnostics) {
  const TomlEntry* resistance = reader.entry(resistanceKey);
  const TomlEntry* length = reader.entry("length");
  const TomlEntry* awg = reader.entry("awg");
  if (!resistance && !length && !awg) return false;
  if (resistance && (length || awg)) {
    diagnostics.error(
        resistance->place,
        "the resistance is given twice: by \"" + std::string(resistanceKey) + "\" and by length and awg",
        "keep one of the two");
    return true;
  }
  if (resistance) {
    lead.length.reset();
    lead.awg.reset();
    reader.take(resistanceKey, lead.resistance, kResistanceRange);
    return true;
  }
  const bool haveLength = reader.need("length", lead.length, kLengthRange, "\"20 m\"");
  const bool haveAwg = reader.need("awg", lead.awg, {"0", "40"}, "26");
  if (haveLength && haveAwg) lead.resistance = units::copperLead(*lead.length, *lead.awg, lead.temperature);
  return true;
}

}  // namespace

void readLeads(const TomlNode& table, const std::string& what, Channel& channel, Diagnostics& diagnostics) {
  const std::vector<Terminal> wires = leadsOf(channel.circuit, channel.sensed);
  TableReader reader(table, "the leads of " + what, diagnostics);

  Lead common;
  common.place = table.place;
  takeConditions(reader, common);
  const bool allAlike = takeResistance(reader, "each", common, diagnostics);
  if (allAlike)
    for (const Terminal wire : wires) channel.leads[wire] = common;

  for (const Terminal wire : wires) {
    const TomlEntry* entry = reader.entry(name(wire));
    if (!entry) continue;
    Lead lead = common;
    lead.place = entry->value.place;
    if (entry->value.type == TomlNode::Type::table) {
      TableReader inner(entry->value, "the lead " + entry->key, diagnostics);
      takeConditions(inner, lead);
      if (!takeResistance(inner, "resistance", lead, diagnostics))
        diagnostics.error(lead.place, "the lead " + entry->key + " has neither resistance nor length and awg",
                          "add resistance = \"2.7 ohm\", or length = \"20 m\" and awg = 26");
      inner.finish();
    } else {
      lead.length.reset();
      lead.awg.reset();
      reader.take(name(wire), lead.resistance, kResistanceRange);
    }
    channel.leads[wire] = lead;
  }

  for (const TomlEntry& entry : table.entries) {  // wires that this circuit does not have
    const auto terminal = terminalNamed(entry.key);
    if (!terminal || std::ranges::count(wires, *terminal)) continue;
    reader.entry(entry.key);
    if (entry.inherited) continue;
    diagnostics.error(entry.place,
                      "a " + std::string(name(channel.circuit)) + " circuit has no lead " + entry.key,
                      "its leads are " + list(wires));
  }
  reader.finish();

  std::vector<Terminal> lacking;
  std::ranges::copy_if(wires, std::back_inserter(lacking),
                       [&](Terminal t) { return !channel.leads.contains(t); });
  if (!lacking.empty())
    diagnostics.error(
        table.place, list(lacking) + " missing from the leads of " + what,
        "give each wire of the " + std::string(name(channel.circuit)) +
            " circuit its resistance, or all of them by each = \"2.7 ohm\" or by length and awg");
}

}  // namespace shuntwright::description
