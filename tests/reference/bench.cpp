#include "tests/reference/bench.h"

#include <stdexcept>

namespace shuntwright::bridge::reference {
namespace {

/// The name in the netlist of a terminal on one side.
std::string point(Terminal t, Side side) {
  const bool far = side == Side::gauge;
  switch (t) {
    case Terminal::exc_plus:
      return far ? "gp" : "p";
    case Terminal::exc_minus:
      return far ? "gn" : "0";
    case Terminal::sig_plus:
      return far ? "gs" : "s";
    case Terminal::sig_minus:
      return far ? "gm" : "m";
    case Terminal::comp:
      return far ? "gs" : "d";
    case Terminal::sense_plus:
      return far ? "gp" : "sp";
    case Terminal::sense_minus:
      return far ? "gn" : "sn";
  }
  throw std::logic_error("no such terminal");
}

/// Terminals one can reach with a clip, on one side.
std::vector<Terminal> reachable(CircuitKind kind, bool sensed, Side side) {
  using enum Terminal;
  std::vector<Terminal> list = {exc_plus, exc_minus, sig_plus, sig_minus};
  if (side == Side::gauge) {
    if (kind == CircuitKind::quarter_2_wire || kind == CircuitKind::quarter_3_wire)
      return {sig_plus, exc_minus};
    if (kind == CircuitKind::half_bending || kind == CircuitKind::half_poisson) {
      return {exc_plus, exc_minus, sig_plus};
    }
    return list;
  }
  if (kind == CircuitKind::quarter_3_wire) list.push_back(comp);
  if (sensed) list.insert(list.end(), {sense_plus, sense_minus});
  return list;
}

}  // namespace

std::array<double, 4> nominalPerStrain(CircuitKind kind) {
  switch (kind) {
    case CircuitKind::quarter_2_wire:
    case CircuitKind::quarter_3_wire:
      return {2, 0, 0, 0};
    case CircuitKind::half_bending:
      return {2, -2, 0, 0};
    case CircuitKind::half_poisson:
      return {2, -0.6, 0, 0};
    case CircuitKind::half_opposite:
      return {2, 0, 2, 0};
    case CircuitKind::full_poisson:
      return {2, -0.6, 2, -0.6};
    case CircuitKind::full_bending_poisson:
      return {2, -0.6, 0.6, -2};
    case CircuitKind::full_bending:
    case CircuitKind::full_shear:
      return {2, -2, 2, -2};
    case CircuitKind::transducer:
      return {2e-3, -2e-3, 2e-3, -2e-3};
  }
  return {};
}

std::vector<Part> partsOf(const Bench& bench, const Shunt* shunt) {
  std::vector<Part> parts;
  const auto resistor = [&](const std::string& a, const std::string& b, long double r) {
    parts.push_back({a, b, r, false});
  };
  const auto wire = [&](const std::string& a, const std::string& b, long double r) {
    parts.push_back({a, b, r, true});
  };
  std::array<long double, 4> r{};
  for (std::size_t i = 0; i < 4; ++i) r[i] = bench.arms_ohm[i] * (1 + bench.perStrain[i] * bench.strain);
  const auto& lead = bench.leads_ohm;
  resistor("s", "m", bench.input_ohm);
  switch (bench.kind) {
    case CircuitKind::quarter_2_wire:  // gauge on two wires; everything else inside
      resistor("p", "s", r[1]);
      wire("s", "gs", lead[2]);
      resistor("gs", "gn", r[0]);
      wire("gn", "0", lead[1]);
      resistor("p", "m", r[2]);
      resistor("m", "0", r[3]);
      break;
    case CircuitKind::quarter_3_wire:  // completion, its wire, gauge, its wire; the signal wire carries
                                       // none
      resistor("p", "d", r[1]);
      wire("d", "gs", lead[4]);
      resistor("gs", "gn", r[0]);
      wire("gn", "0", lead[1]);
      wire("gs", "s", lead[2]);
      resistor("p", "m", r[2]);
      resistor("m", "0", r[3]);
      break;
    case CircuitKind::half_bending:
    case CircuitKind::half_poisson:  // two gauges on three wires
      wire("p", "gp", lead[0]);
      resistor("gp", "gs", r[1]);
      resistor("gs", "gn", r[0]);
      wire("gn", "0", lead[1]);
      wire("gs", "s", lead[2]);
      resistor("p", "m", r[2]);
      resistor("m", "0", r[3]);
      break;
    case CircuitKind::half_opposite:  // two gauges on two wires each
      resistor("p", "s", r[1]);
      wire("s", "gs", lead[2]);
      resistor("gs", "gn", r[0]);
      wire("gn", "0", lead[1]);
      wire("p", "gp", lead[0]);
      resistor("gp", "gm", r[2]);
      wire("gm", "m", lead[3]);
      resistor("m", "0", r[3]);
      break;
    default: {  // a full bridge at the far end of four or six wires
      const bool bought = bench.kind == CircuitKind::transducer;
      const std::string top = bought ? "ip" : "gp", bottom = bought ? "in" : "gn";
      if (bought) {
        wire("gp", "ip", bench.series_ohm);
        wire("gn", "in", bench.series_ohm);
      }
      wire("p", "gp", lead[0]);
      wire("gn", "0", lead[1]);
      resistor("gs", bottom, r[0]);
      resistor(top, "gs", r[1]);
      resistor(top, "gm", r[2]);
      resistor("gm", bottom, r[3]);
      wire("gs", "s", lead[2]);
      wire("gm", "m", lead[3]);
      if (bench.sensed) {
        wire("gp", "sp", lead[5]);
        wire("gn", "sn", lead[6]);
      }
    }
  }
  if (shunt) resistor(point(shunt->a, shunt->side), point(shunt->b, shunt->side), shunt->r_ohm);
  return parts;
}

Circuit asCircuit(const Bench& bench) {
  Circuit c;
  c.kind = bench.kind;
  c.sensed = bench.sensed;
  for (std::size_t i = 0; i < 4; ++i) c.arms[i] = {bench.arms_ohm[i] * units::ohm, bench.perStrain[i]};
  for (std::size_t i = 0; i < 7; ++i) c.leads[i] = bench.leads_ohm[i] * units::ohm;
  c.inputResistance = bench.input_ohm * units::ohm;
  c.excitationSeries = bench.series_ohm * units::ohm;
  return c;
}

Bench drawnBench(const Variant& variant, Random& random) {
  Bench bench;
  bench.kind = variant.kind;
  bench.sensed = variant.sensed;
  bench.perStrain = nominalPerStrain(variant.kind);
  const double nominal[] = {120, 350, 1000};
  const double gauge = nominal[random.below(3)];
  for (double& arm : bench.arms_ohm) arm = gauge * random.uniform(0.995, 1.005);
  // In every third bridge the gauges have hardly anything in common but the specimen.
  const bool unequal = random.below(3) == 0;
  if (unequal) {
    for (double& arm : bench.arms_ohm) arm = nominal[random.below(3)] * random.uniform(0.98, 1.02);
    for (double& factor : bench.perStrain) factor *= random.uniform(0.5, 1.5);
  }
  for (double& lead : bench.leads_ohm) lead = random.below(4) == 0 ? 0 : random.uniform(0, 25);
  const double inputs[] = {1e5, 1e7, 1e9};
  bench.input_ohm = inputs[random.below(3)];
  const bool transducer = variant.kind == CircuitKind::transducer;
  bench.series_ohm = transducer && random.below(3) != 0 ? random.uniform(0, 30) : 0;
  bench.strain = random.uniform(-1, 1) * (transducer ? 1.2 : 0.01);
  return bench;
}

Shunt drawnShunt(const Bench& bench, Side side, Random& random) {
  const auto list = reachable(bench.kind, bench.sensed, side);
  const auto a = random.below(list.size());
  const auto b = (a + 1 + random.below(list.size() - 1)) % list.size();
  return {list[a], list[b], side, random.uniform(5e3, 1e6)};
}

}  // namespace shuntwright::bridge::reference
