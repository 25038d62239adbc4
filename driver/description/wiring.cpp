#include "driver/description/wiring.h"

#include <algorithm>
#include <cctype>

namespace shuntwright::description {
namespace {

using enum Terminal;
using enum CircuitKind;

constexpr Terminal kAllTerminals[] = {exc_plus, exc_minus,  sig_plus,   sig_minus,
                                      comp,     sense_plus, sense_minus};
constexpr CircuitKind kAllCircuits[] = {quarter_2_wire, quarter_3_wire, half_bending, half_poisson,
                                        half_opposite,  full_bending,   full_poisson, full_bending_poisson,
                                        full_shear,     transducer};

bool sameWord(std::string_view a, std::string_view b) {
  return std::ranges::equal(
      a, b, [](unsigned char x, unsigned char y) { return std::tolower(x) == std::tolower(y); });
}

}  // namespace

std::string_view name(Terminal terminal) {
  switch (terminal) {
    case exc_plus:
      return "EXC+";
    case exc_minus:
      return "EXC-";
    case sig_plus:
      return "SIG+";
    case sig_minus:
      return "SIG-";
    case comp:
      return "COMP";
    case sense_plus:
      return "SENSE+";
    case sense_minus:
      return "SENSE-";
  }
  return "";
}

std::string_view name(Side side) {
  return side == Side::instrument ? "instrument" : "gauge";
}

std::string_view name(CircuitKind kind) {
  switch (kind) {
    case quarter_2_wire:
      return "quarter 2-wire";
    case quarter_3_wire:
      return "quarter 3-wire";
    case half_bending:
      return "half bending";
    case half_poisson:
      return "half Poisson";
    case half_opposite:
      return "half opposite";
    case full_bending:
      return "full bending";
    case full_poisson:
      return "full Poisson";
    case full_bending_poisson:
      return "full bending Poisson";
    case full_shear:
      return "full shear";
    case transducer:
      return "transducer";
  }
  return "";
}

std::optional<Terminal> terminalNamed(std::string_view text) {
  for (const Terminal terminal : kAllTerminals)
    if (sameWord(name(terminal), text)) return terminal;
  return {};
}

std::optional<CircuitKind> circuitNamed(std::string_view text) {
  for (const CircuitKind kind : kAllCircuits)
    if (sameWord(name(kind), text)) return kind;
  return {};
}

std::vector<std::string_view> circuitNames() {
  std::vector<std::string_view> names;
  for (const CircuitKind kind : kAllCircuits) names.push_back(name(kind));
  return names;
}

bool isFull(CircuitKind kind) {
  switch (kind) {
    case full_bending:
    case full_poisson:
    case full_bending_poisson:
    case full_shear:
    case transducer:
      return true;
    default:
      return false;
  }
}

bool carriesCurrent(CircuitKind kind, Terminal lead) {
  switch (lead) {
    case exc_plus:
    case exc_minus:
    case comp:
      return true;
    case sig_plus:  // of two wires, or between a gauge and its completion
      return kind == quarter_2_wire || kind == half_opposite;
    case sig_minus:
      return kind == half_opposite;
    default:
      return false;
  }
}

std::vector<Terminal> leadsOf(CircuitKind kind, bool sensed) {
  switch (kind) {
    case quarter_2_wire:
      return {exc_minus, sig_plus};
    case quarter_3_wire:
      return {exc_minus, comp, sig_plus};
    case half_bending:
    case half_poisson:
      return {exc_plus, sig_plus, exc_minus};
    case half_opposite:
      return {exc_plus, exc_minus, sig_plus, sig_minus};
    default:
      break;
  }
  if (sensed) return {exc_plus, exc_minus, sig_plus, sig_minus, sense_plus, sense_minus};
  return {exc_plus, exc_minus, sig_plus, sig_minus};
}

std::vector<Terminal> terminalsOf(CircuitKind kind, bool sensed, Side side) {
  std::vector<Terminal> terminals = leadsOf(kind, sensed);
  if (side == Side::gauge) return terminals;  // the far ends of the leads
  for (const Terminal terminal : {exc_plus, exc_minus, sig_plus, sig_minus})
    if (!std::ranges::count(terminals, terminal)) terminals.push_back(terminal);
  return terminals;
}

bool onePoint(Terminal a, Terminal b, Side side) {
  if (a == b) return true;
  if (side == Side::instrument) return false;
  const auto pair = [&](Terminal x, Terminal y) { return (a == x && b == y) || (a == y && b == x); };
  return pair(comp, sig_plus) || pair(exc_plus, sense_plus) || pair(exc_minus, sense_minus);
}

std::array<double, 4> armWeights(CircuitKind kind, double poisson) {
  switch (kind) {
    case quarter_2_wire:
    case quarter_3_wire:
      return {1, 0, 0, 0};
    case half_bending:
      return {1, -1, 0, 0};
    case half_poisson:
      return {1, -poisson, 0, 0};
    case half_opposite:
      return {1, 0, 1, 0};
    case full_poisson:
      return {1, -poisson, 1, -poisson};
    case full_bending_poisson:
      return {1, -poisson, poisson, -1};
    case full_bending:
    case full_shear:
    case transducer:
      return {1, -1, 1, -1};
  }
  return {};
}

}  // namespace shuntwright::description
