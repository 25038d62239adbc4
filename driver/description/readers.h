#pragma once

#include <optional>
#include <string>

#include "driver/description/diagnostics.h"
#include "driver/description/load.h"
#include "driver/description/profile.h"
#include "driver/description/rack.h"
#include "driver/description/toml_reader.h"

// What the readers of this part share; not for other parts.
namespace shuntwright::description {

/// A profile whose text is TOML. Reports what is wrong; what it returns may be used only without errors, or
/// to find further ones.
Profile readProfile(const TomlNode& root, const std::string& file, Diagnostics& diagnostics);

/// The same for a rack; `read` gives the texts of its profiles.
Rack readRack(const TomlNode& root, const std::string& file, const FileReader& read,
              Diagnostics& diagnostics);

/// Reads one [[channel]] (defaults merged in) of a rack whose devices, gauges and resistors are known.
Channel readChannel(const TomlNode& table, const Rack& rack, Diagnostics& diagnostics);

/// `leads = {...}` as one lead for every terminal of the circuit.
void readLeads(const TomlNode& table, const std::string& what, Channel& channel, Diagnostics& diagnostics);

/// `arms = {...}` of a channel whose circuit, gauge and measured resistance are known: what the gauges of one bridge
/// differ in.
void readArms(const TomlNode& table, const Rack& rack, Channel& channel, Diagnostics& diagnostics);

/// `transducer = {...}`.
TransducerSheet readTransducer(const TomlNode& table, Diagnostics& diagnostics);

/// One item of `shunts = [...]`.
Shunt readShunt(const TomlNode& table, std::size_t number, const Channel& channel, const Rack& rack,
                Diagnostics& diagnostics);

/// Keys of a gauge that matter behind its bridge: thermal output, slope of the factor, transverse sensitivity.
void readGaugeEffects(TableReader& reader, GaugeSheet& gauge, Diagnostics& diagnostics);

/// The same of a channel: temperature channel, temperature at zero, ratio of the strain field. That the channels
/// it names exist is checked by readSpots.
void readChannelEffects(TableReader& reader, Channel& channel);

/// [[rosette]] and [[pair]] of a rack whose channels are known, and what its channels say of each other.
void readSpots(TableReader& root, Rack& rack, Diagnostics& diagnostics);

/// True when the entry stands in the file for this very thing and was not merged in from defaults.
inline bool isOwn(const TomlEntry* entry) {
  return entry && !entry->inherited;
}

/// Names of a list of named things, for suggestions.
template <class Range>
std::vector<std::string_view> namesOf(const Range& range) {
  std::vector<std::string_view> names;
  for (const auto& item : range) {
    if constexpr (requires { item.second.name; })
      names.push_back(item.second.name);
    else
      names.push_back(item.name);
  }
  return names;
}

/// A name is given and may be used in other files and on the command line.
bool readName(TableReader& reader, std::string& out, Diagnostics& diagnostics);

}  // namespace shuntwright::description
