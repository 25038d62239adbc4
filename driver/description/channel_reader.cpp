#include <algorithm>
#include <cmath>
#include <set>

#include "driver/description/readers.h"

namespace shuntwright::description {
namespace {

bool isQuarter(CircuitKind kind) {
  return kind == CircuitKind::quarter_2_wire || kind == CircuitKind::quarter_3_wire;
}

bool hasCompletion(CircuitKind kind) {
  return isQuarter(kind) || kind == CircuitKind::half_opposite;
}

template <class Quantity>
std::string offered(const std::vector<Quantity>& choices) {
  std::string out;
  for (const Quantity choice : choices) out += (out.empty() ? "" : ", ") + show(choice);
  return out;
}

template <class Quantity>
bool same(Quantity a, Quantity b) {
  return std::abs(a / b - 1) < 1e-9;
}

class ChannelReader {
 public:
  ChannelReader(const TomlNode& table, const Rack& rack, Diagnostics& diagnostics)
      : reader_(table, titleOf(table), diagnostics), rack_(rack), diagnostics_(diagnostics) {
    channel_.place = table.place;
  }

  Channel read() {
    readName(reader_, channel_.name, diagnostics_);
    readInput();
    const bool circuitKnown = readCircuit();
    if (circuitKnown) checkHalfBridge();
    readGauge();
    if (circuitKnown) readGaugesOfArms();
    readTransducer();
    readCompletion();
    readExcitation();
    reader_.take("poisson", channel_.poisson, {"0", "0.5"});
    reader_.choose("lead_loss", channel_.leadLoss,
                   {{"in prediction", LeadLoss::in_prediction}, {"in span", LeadLoss::in_span},
                    {"identified", LeadLoss::identified}});
    reader_.choose("unbalance", channel_.unbalance,
                   {{"unknown", Unbalance::unknown},
                    {"standing strain", Unbalance::standing_strain},
                    {"gauge off nominal", Unbalance::gauge_off_nominal},
                    {"completion", Unbalance::completion}});
    reader_.take("load_control", channel_.loadControl);
    reader_.take("expected", channel_.expected, {"0 microstrain", "200000 microstrain"});
    reader_.take("group", channel_.group);
    readChannelEffects(reader_, channel_);
    // Leads and shunts are judged by the circuit; with that unknown, every remark would be a guess.
    const TomlEntry* leads = reader_.neededEntry("leads", "{ length = \"20 m\", awg = 26 }");
    if (leads && reader_.isA(TomlNode::Type::table, *leads) && circuitKnown)
      readLeads(leads->value, leads->inherited ? "the defaults" : reader_.what(), channel_, diagnostics_);
    const auto shunts = reader_.tables("shunts");
    if (circuitKnown) readShunts(shunts);
    checkIdentified();
    reader_.finish();
    return std::move(channel_);
  }

 private:
  static std::string titleOf(const TomlNode& table) {
    const TomlEntry* entry = table.find("name");
    return entry && !entry->value.text.empty() ? "channel \"" + entry->value.text + '"' : "the channel";
  }

  void readInput() {
    const bool numbered = reader_.need("input", channel_.input, {"0", "70000"}, "1");
    if (!reader_.need("device", channel_.device)) return;
    const Place& place = reader_.entry("device")->value.place;
    const Device* device = rack_.device(channel_.device);
    if (!device) {
      diagnostics_.error(place, "no device is called \"" + channel_.device + '"',
                         rack_.devices.empty() ? "describe it in a [[device]] table"
                                               : suggestion(channel_.device, namesOf(rack_.devices)));
      return;
    }
    if (!device->profile) return;
    if (!device->profile->inputs) {
      diagnostics_.error(place, "device \"" + device->name + "\" has no bridge inputs",
                         "name a device whose profile has [inputs]");
      return;
    }
    inputs_ = &*device->profile->inputs;
    if (numbered && (channel_.input < inputs_->first || channel_.input >= inputs_->first + inputs_->count))
      diagnostics_.error(reader_.entry("input")->value.place,
                         "device \"" + device->name + "\" has no input " + std::to_string(channel_.input),
                         "its inputs are " + std::to_string(inputs_->first) + " to " +
                             std::to_string(inputs_->first + inputs_->count - 1));
  }

  bool readCircuit() {
    std::string word;
    if (!reader_.need("circuit", word, {}, "\"quarter 3-wire\"")) return false;
    const auto kind = circuitNamed(word);
    if (!kind) {
      diagnostics_.error(reader_.entry("circuit")->value.place, "no circuit is called \"" + word + '"',
                         suggestion(word, circuitNames()));
      return false;
    }
    channel_.circuit = *kind;
    bool sensed = false;
    if (reader_.take("sensed", sensed) && sensed) {
      if (isFull(*kind))
        channel_.sensed = true;
      else if (isOwn(reader_.entry("sensed")))
        refuse("sensed", "has no sense leads", "sensing needs a full bridge or a transducer");
    }
    return true;
  }

  /// A wrong value would not be seen in a strain, but in every step of a shunt across it: none is assumed.
  void checkHalfBridge() {
    const bool inside = !isFull(channel_.circuit) && channel_.circuit != CircuitKind::half_opposite;
    if (!inside || !inputs_ || inputs_->halfBridge.value > units::Resistance{}) return;
    diagnostics_.error(reader_.entry("circuit")->value.place,
                       "a " + std::string(name(channel_.circuit)) + " is completed by the amplifier's half bridge, and \"" +
                           channel_.device + "\" has none",
                       "state half_bridge = { value = \"1 kohm\", tolerance = \"0.02 %\" } in [inputs] of " +
                           rack_.device(channel_.device)->profile->file);
  }

  void readGauge() {
    const bool wanted = channel_.circuit != CircuitKind::transducer;
    if (!wanted) {
      for (const std::string_view key : {"gauge", "gauge_resistance"})
        if (isOwn(reader_.entry(key)))
          refuse(key, "has no gauge of its own", "describe it by transducer = { ... } instead");
      return;
    }
    if (reader_.need("gauge", channel_.gauge) && !rack_.gauges.contains(channel_.gauge))
      diagnostics_.error(reader_.entry("gauge")->value.place, "no gauge is called \"" + channel_.gauge + '"',
                         rack_.gauges.empty() ? "describe it in [gauge." + channel_.gauge + "]"
                                              : suggestion(channel_.gauge, namesOf(rack_.gauges)));
    const TomlNode* measured = reader_.table("gauge_resistance");
    if (!measured) return;
    Toleranced out;
    TableReader inner(*measured, "\"gauge_resistance\"", diagnostics_);
    const bool haveValue = inner.need("value", out.value, {"10 ohm", "100 kohm"}, "\"350.4 ohm\"");
    const bool haveUncertainty = inner.need("uncertainty", out.tolerance, {"0 %", "5 %"}, "\"0.02 %\"");
    inner.finish();
    if (!haveValue || !haveUncertainty) return;
    channel_.measuredResistance = out;
    const auto sheet = rack_.gauges.find(channel_.gauge);
    if (sheet == rack_.gauges.end()) return;
    const units::Resistance nominal = sheet->second.resistance.value;
    if (std::abs(out.value / nominal - 1) > 0.05)
      diagnostics_.warning(inner.entry("value")->value.place,
                           "the measured gauge resistance " + show(out.value) +
                               " is more than 5 % off the nominal " + show(nominal),
                           "check the reading and the gauge's name");
  }

  void readGaugesOfArms() {
    const TomlEntry* entry = reader_.entry("arms");
    if (!entry) return;
    if (channel_.circuit == CircuitKind::transducer) {
      if (isOwn(entry)) refuse("arms", "has no gauges of its own", "take \"arms\" out");
      return;
    }
    if (reader_.isA(TomlNode::Type::table, *entry)) readArms(entry->value, rack_, channel_, diagnostics_);
  }

  void readTransducer() {
    const bool wanted = channel_.circuit == CircuitKind::transducer;
    const TomlEntry* entry = reader_.entry("transducer");
    if (!wanted) {
      if (isOwn(entry))
        refuse("transducer", "is described by its gauge", "write circuit = \"transducer\" if it is one");
      return;
    }
    if (!entry) {
      reader_.neededEntry("transducer", "{ sensitivity = \"2 mV/V\", rated_value = 50, unit = \"kN\" }");
      return;
    }
    if (!reader_.isA(TomlNode::Type::table, *entry)) return;
    channel_.transducer = description::readTransducer(entry->value, diagnostics_);
  }

  void readCompletion() {
    const TomlEntry* entry = reader_.entry("completion");
    if (!hasCompletion(channel_.circuit)) {
      if (isOwn(entry)) refuse("completion", "needs no completion resistor", "take \"completion\" out");
      return;
    }
    const auto sheet = rack_.gauges.find(channel_.gauge);
    if (!entry) {
      if (sheet == rack_.gauges.end()) return;
      channel_.completion = sheet->second.resistance.value;  // checked below against what is offered
    } else if (!reader_.take("completion", channel_.completion, {"10 ohm", "100 kohm"})) {
      return;
    }
    if (!inputs_) return;
    std::vector<units::Resistance> values;
    for (const Toleranced& completion : inputs_->completions) values.push_back(completion.value);
    if (std::ranges::any_of(values, [&](units::Resistance r) { return same(r, *channel_.completion); }))
      return;
    diagnostics_.error(
        entry ? entry->value.place : reader_.place(),
        "device \"" + channel_.device + "\" has no completion resistor of " + show(*channel_.completion),
        values.empty() ? "its profile lists no completion resistors"
                       : "its completion resistors are " + offered(values));
  }

  void readExcitation() {
    const bool given = reader_.take("excitation", channel_.excitation, {"0.1 V", "50 V"});
    if (!inputs_ || inputs_->excitations.empty()) return;
    const auto& choices = inputs_->excitations;
    if (!reader_.has("excitation")) channel_.excitation = choices.front();
    if (!given ||
        std::ranges::any_of(choices, [&](units::Voltage v) { return same(v, channel_.excitation); }))
      return;
    diagnostics_.error(reader_.entry("excitation")->value.place,
                       "device \"" + channel_.device + "\" has no excitation of " + show(channel_.excitation),
                       "it offers " + offered(choices));
  }

  void checkIdentified() {
    if (channel_.leadLoss != LeadLoss::identified) return;
    const TomlEntry* entry = reader_.entry("lead_loss");
    if (channel_.shunts.size() < 2)
      diagnostics_.error(entry->place,
                         "leads cannot be identified from " + std::to_string(channel_.shunts.size()) +
                             (channel_.shunts.size() == 1 ? " shunt" : " shunts"),
                         "add a second position for the same resistor, such as across = [\"COMP\", \"EXC-\"], or use "
                         "lead_loss = \"in prediction\"");
  }

  void readShunts(const std::vector<const TomlNode*>& tables) {
    std::set<std::string> names;
    for (const TomlNode* table : tables) {
      Shunt shunt = readShunt(*table, channel_.shunts.size() + 1, channel_, rack_, diagnostics_);
      if (!names.insert(shunt.name).second)
        diagnostics_.error(shunt.place,
                           "two shunts of " + reader_.what() + " are called \"" + shunt.name + '"',
                           "give each its own name");
      channel_.shunts.push_back(std::move(shunt));
    }
  }

  void refuse(std::string_view key, std::string_view why, std::string remedy) {
    diagnostics_.error(reader_.entry(key)->place,
                       "a " + std::string(name(channel_.circuit)) + " circuit " + std::string(why),
                       std::move(remedy));
  }

  TableReader reader_;
  const Rack& rack_;
  Diagnostics& diagnostics_;
  Channel channel_;
  const Inputs* inputs_ = nullptr;
};

}  // namespace

Channel readChannel(const TomlNode& table, const Rack& rack, Diagnostics& diagnostics) {
  return ChannelReader(table, rack, diagnostics).read();
}

}  // namespace shuntwright::description
