#include <algorithm>
#include <charconv>

#include "driver/description/readers.h"

namespace shuntwright::description {
namespace {

using enum Terminal;

/// A position in plain words, and what it means in the circuits that have it.
struct Position {
  std::string_view words;
  Terminal from;
  Terminal to;
  Side side;
};

bool hasInnerHalfBridge(CircuitKind kind) {
  return kind == CircuitKind::quarter_2_wire || kind == CircuitKind::quarter_3_wire ||
         kind == CircuitKind::half_bending || kind == CircuitKind::half_poisson;
}

std::vector<Position> positionsOf(CircuitKind kind) {
  std::vector<Position> out;
  if (kind == CircuitKind::quarter_3_wire) out.push_back({"completion", exc_plus, comp, Side::instrument});
  if (kind == CircuitKind::quarter_2_wire || kind == CircuitKind::half_opposite)
    out.push_back({"completion", exc_plus, sig_plus, Side::instrument});
  if (kind != CircuitKind::transducer) out.push_back({"gauge", sig_plus, exc_minus, Side::gauge});
  if (hasInnerHalfBridge(kind)) {
    out.push_back({"half bridge upper", exc_plus, sig_minus, Side::instrument});
    out.push_back({"half bridge lower", sig_minus, exc_minus, Side::instrument});
  }
  out.push_back({"signal to excitation", sig_plus, exc_minus, Side::instrument});
  return out;
}

constexpr std::string_view kAllWords[] = {"completion", "gauge", "half bridge upper", "half bridge lower",
                                          "signal to excitation"};

class ShuntReader {
 public:
  ShuntReader(const TomlNode& table, std::size_t number, const Channel& channel, const Rack& rack,
              Diagnostics& diagnostics)
      : reader_(table, "shunt " + std::to_string(number) + " of channel \"" + channel.name + '"',
                diagnostics),
        channel_(channel),
        rack_(rack),
        diagnostics_(diagnostics) {
    shunt_.place = table.place;
    shunt_.name = number == 1 ? "shunt" : "shunt " + std::to_string(number);
  }

  Shunt read() {
    if (reader_.has("name")) readName(reader_, shunt_.name, diagnostics_);
    if (reader_.need("resistor", shunt_.resistor) && !rack_.resistors.contains(shunt_.resistor))
      diagnostics_.error(reader_.entry("resistor")->value.place,
                         "no resistor is called \"" + shunt_.resistor + '"',
                         rack_.resistors.empty() ? "describe it in [resistor." + shunt_.resistor + "]"
                                                 : suggestion(shunt_.resistor, namesOf(rack_.resistors)));
    readRelay();
    readPosition();
    reader_.finish();
    return std::move(shunt_);
  }

 private:
  void readRelay() {
    std::string text;
    if (!reader_.need("relay", text, {}, "\"relays1/3\"")) return;
    const Place& place = reader_.entry("relay")->value.place;
    const auto slash = text.rfind('/');
    int number = 0;
    const char* end = text.data() + text.size();
    const char* digits = slash == std::string::npos ? end : text.data() + slash + 1;
    const auto [rest, problem] = std::from_chars(digits, end, number);
    if (problem != std::errc() || rest != end) {
      diagnostics_.error(place, '"' + text + "\" names no relay", "write device/number: \"relays1/3\"");
      return;
    }
    shunt_.relay = {text.substr(0, slash), number};
    const Device* device = rack_.device(shunt_.relay.device);
    if (!device) {
      diagnostics_.error(place, "no device is called \"" + shunt_.relay.device + '"',
                         suggestion(shunt_.relay.device, namesOf(rack_.devices)));
      return;
    }
    if (!device->profile) return;
    const auto& relays = device->profile->relays;
    if (!relays) {
      diagnostics_.error(place, "device \"" + device->name + "\" has no relays",
                         "name a device whose profile has [relays]");
    } else if (number < relays->first || number >= relays->first + relays->count) {
      diagnostics_.error(place, "device \"" + device->name + "\" has no relay " + std::to_string(number),
                         "its relays are " + std::to_string(relays->first) + " to " +
                             std::to_string(relays->first + relays->count - 1));
    }
  }

  void readPosition() {
    const TomlEntry* across = reader_.neededEntry("across", "\"completion\"");
    const TomlEntry* at = reader_.entry("at");
    const bool atGood =
        reader_.choose("at", shunt_.side, {{"instrument", Side::instrument}, {"gauge", Side::gauge}});
    if (!across) return;
    if (across->value.type == TomlNode::Type::text) {
      readWords(across->value, atGood ? at : nullptr);
    } else if (across->value.type == TomlNode::Type::array) {
      readTerminals(across->value);
    } else {
      diagnostics_.error(across->value.place, "\"across\" must be words or two terminals",
                         "write it like \"completion\" or [\"EXC+\", \"SIG-\"]");
    }
  }

  void readWords(const TomlNode& node, const TomlEntry* at) {
    const std::vector<Position> positions = positionsOf(channel_.circuit);
    const auto found = std::ranges::find(positions, node.text, &Position::words);
    if (found == positions.end()) {
      std::vector<std::string_view> offered;
      for (const Position& position : positions) offered.push_back(position.words);
      const bool elsewhere = std::ranges::count(kAllWords, node.text) > 0;
      diagnostics_.error(node.place,
                         elsewhere ? "a " + std::string(name(channel_.circuit)) + " circuit has no \"" +
                                         node.text + "\" to put a shunt across"
                                   : "\"across\" cannot be \"" + node.text + '"',
                         elsewhere
                             ? "here it can be " + oneOf(offered) + ", or two terminals: [\"EXC+\", \"SIG+\"]"
                             : suggestion(node.text, {std::begin(kAllWords), std::end(kAllWords)}));
      return;
    }
    if (at && shunt_.side != found->side)
      diagnostics_.error(
          at->value.place,
          '"' + std::string(found->words) + "\" is a position at the " + std::string(name(found->side)),
          "take \"at\" out, or name two terminals in \"across\"");
    shunt_.across = {found->from, found->to};
    shunt_.side = found->side;
  }

  void readTerminals(const TomlNode& node) {
    if (node.items.size() != 2) {
      diagnostics_.error(
          node.place, "\"across\" names " + std::to_string(node.items.size()) + " terminals instead of two",
          "write it like [\"EXC+\", \"SIG-\"]");
      return;
    }
    const std::vector<Terminal> offered = terminalsOf(channel_.circuit, channel_.sensed, shunt_.side);
    std::vector<std::string_view> words;
    for (const Terminal terminal : offered) words.push_back(name(terminal));
    bool good = true;
    for (const std::size_t i : {0u, 1u}) {
      std::string text;
      if (!decode(node.items[i], "a terminal of \"across\"", text, {}, diagnostics_)) {
        good = false;
        continue;
      }
      const auto terminal = terminalNamed(text);
      if (!terminal || !std::ranges::count(offered, *terminal)) {
        diagnostics_.error(node.items[i].place,
                           "a " + std::string(name(channel_.circuit)) + " circuit has no terminal \"" + text +
                               "\" at the " + std::string(name(shunt_.side)),
                           "it can be " + oneOf(words));
        good = false;
        continue;
      }
      (i == 0 ? shunt_.across.first : shunt_.across.second) = *terminal;
    }
    if (good && onePoint(shunt_.across.first, shunt_.across.second, shunt_.side))
      diagnostics_.error(node.place,
                         std::string(name(shunt_.across.first)) + " and " +
                             std::string(name(shunt_.across.second)) + " are one point at the " +
                             std::string(name(shunt_.side)),
                         "a shunt goes between two different points");
  }

  TableReader reader_;
  const Channel& channel_;
  const Rack& rack_;
  Diagnostics& diagnostics_;
  Shunt shunt_;
};

}  // namespace

Shunt readShunt(const TomlNode& table, std::size_t number, const Channel& channel, const Rack& rack,
                Diagnostics& diagnostics) {
  return ShuntReader(table, number, channel, rack, diagnostics).read();
}

}  // namespace shuntwright::description
