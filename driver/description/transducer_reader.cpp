#include <algorithm>

#include "driver/description/readers.h"

namespace shuntwright::description {
namespace {

/// `across = ["SIG-", "EXC-"]`: two of the four corners.
bool readCorners(const TomlEntry& entry, std::pair<Terminal, Terminal>& out, Diagnostics& diagnostics) {
  using enum Terminal;
  static constexpr Terminal kCorners[] = {exc_plus, exc_minus, sig_plus, sig_minus};
  std::vector<std::string_view> words;
  for (const Terminal corner : kCorners) words.push_back(name(corner));
  if (entry.value.type != TomlNode::Type::array || entry.value.items.size() != 2) {
    diagnostics.error(entry.value.place, "\"across\" must be two terminals of the transducer",
                      "write it like [\"SIG-\", \"EXC-\"]");
    return false;
  }
  Terminal found[2]{};
  for (std::size_t i = 0; i < 2; ++i) {
    std::string text;
    const TomlNode& item = entry.value.items[i];
    if (!decode(item, "a terminal of \"across\"", text, {}, diagnostics)) return false;
    const auto terminal = terminalNamed(text);
    if (!terminal || !std::ranges::count(kCorners, *terminal)) {
      diagnostics.error(item.place, "a transducer has no terminal \"" + text + "\" to put a resistor on",
                        "it can be " + oneOf(words));
      return false;
    }
    found[i] = *terminal;
  }
  const auto isExcitation = [](Terminal t) { return t == exc_plus || t == exc_minus; };
  if (isExcitation(found[0]) == isExcitation(found[1])) {
    diagnostics.error(entry.value.place, "a resistor there is across no arm of the transducer",
                      "name one excitation and one signal terminal: [\"SIG-\", \"EXC-\"]");
    return false;
  }
  out = {found[0], found[1]};
  return true;
}

std::optional<CertificateShunt> readCertificateShunt(const TomlNode& table, Diagnostics& diagnostics) {
  TableReader reader(table, "\"certificate_shunt\"", diagnostics);
  CertificateShunt out;
  bool good = reader.need("resistance", out.resistance, {"1 kohm", "100 Mohm"}, "\"100 kohm\"");
  good = reader.need("step", out.step, {"0.001 mV/V", "20 mV/V"}, "\"0.873 mV/V\"") && good;
  good = reader.need("tolerance", out.tolerance, {"0 %", "20 %"}, "\"0.05 %\"") && good;
  const TomlEntry* across = reader.neededEntry("across", "[\"SIG-\", \"EXC-\"]");
  good = across && readCorners(*across, out.across, diagnostics) && good;
  reader.finish();
  if (!good) return std::nullopt;
  return out;
}

}  // namespace

TransducerSheet readTransducer(const TomlNode& table, Diagnostics& diagnostics) {
  TransducerSheet out;
  TableReader reader(table, "\"transducer\"", diagnostics);
  reader.take("input_resistance", out.inputResistance, {"10 ohm", "100 kohm"});
  reader.take("output_resistance", out.outputResistance, {"10 ohm", "100 kohm"});
  reader.take("input_resistance_tolerance", out.inputTolerance, {"0 %", "20 %"});
  reader.take("output_resistance_tolerance", out.outputTolerance, {"0 %", "20 %"});
  if (out.inputResistance < out.outputResistance)
    diagnostics.error(table.place,
                      "the input resistance " + show(out.inputResistance) +
                          " is below the output resistance " + show(out.outputResistance),
                      "swap them: the compensation resistors stand in the excitation lines");
  reader.need("sensitivity", out.sensitivity, {"0.01 mV/V", "100 mV/V"}, "\"2 mV/V\"");
  reader.take("sensitivity_tolerance", out.sensitivityTolerance, {"0 %", "20 %"});
  reader.need("rated_value", out.ratedValue, {"1e-9", "1e12"}, "50");
  reader.need("unit", out.unit, {}, "\"kN\"");
  if (const TomlNode* shunt = reader.table("certificate_shunt")) {
    out.certificateShunt = readCertificateShunt(*shunt, diagnostics);
    if (reader.has("output_resistance_tolerance"))
      diagnostics.error(
          reader.entry("output_resistance_tolerance")->place,
          "the certificate's shunt says what the output resistance does to a step, and how well",
          "take \"output_resistance_tolerance\" out");
  }
  reader.finish();
  return out;
}

}  // namespace shuntwright::description
