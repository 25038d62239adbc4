#pragma once

#include <array>
#include <string>
#include <vector>

#include "driver/bridge/circuit.h"
#include "driver/core/random.h"

// Bridges listed part by part, wire by wire, with nothing taken from driver/bridge: what its network is held
// against, by ngspice and by a solver of its own.
namespace shuntwright::bridge::reference {

using description::CircuitKind;
using description::Side;
using description::Terminal;

/// A bridge as the person at the bench would list it. Leads 0..6 in the order of Terminal.
struct Bench {
  CircuitKind kind = CircuitKind::quarter_3_wire;
  bool sensed = false;
  std::array<double, 4> arms_ohm{120, 120, 120, 120};
  std::array<double, 4> perStrain{};
  std::array<double, 7> leads_ohm{};
  double input_ohm = 1e9;
  double series_ohm = 0;
  long double strain = 0;
};

struct Shunt {
  Terminal a, b;
  Side side;
  double r_ohm;
};

/// One resistor or wire between two named points. "p" and "0" are EXC+ and EXC- at the instrument, "s" and
/// "m" SIG+ and SIG-, "sp" and "sn" SENSE+ and SENSE-.
struct Part {
  std::string from, to;
  long double r_ohm;
  bool isWire;  ///< may have 0 ohm
};
std::vector<Part> partsOf(const Bench& bench, const Shunt* shunt);

/// The same bridge for driver/bridge.
Circuit asCircuit(const Bench& bench);

struct Variant {
  CircuitKind kind;
  bool sensed;
};
inline constexpr Variant kVariants[] = {{CircuitKind::quarter_2_wire, false},
                                        {CircuitKind::quarter_3_wire, false},
                                        {CircuitKind::half_bending, false},
                                        {CircuitKind::half_poisson, false},
                                        {CircuitKind::half_opposite, false},
                                        {CircuitKind::full_bending, false},
                                        {CircuitKind::full_bending, true},
                                        {CircuitKind::full_poisson, false},
                                        {CircuitKind::full_poisson, true},
                                        {CircuitKind::full_bending_poisson, true},
                                        {CircuitKind::full_bending_poisson, false},
                                        {CircuitKind::full_shear, false},
                                        {CircuitKind::full_shear, true},
                                        {CircuitKind::transducer, false},
                                        {CircuitKind::transducer, true}};

/// Strain factor of each arm at K = 2, nu = 0.3; of a transducer of 2 mV/V: at its terminals, rated value 1.
std::array<double, 4> nominalPerStrain(CircuitKind kind);

/// By chance: gauges of 120, 350 or 1000 ohm, in every third bridge of different resistance and factor; leads
/// of 0 to 25 ohm; a strain within 1 % (a transducer: 1.2 times its rated value).
Bench drawnBench(const Variant& variant, Random& random);
Shunt drawnShunt(const Bench& bench, Side side, Random& random);

}  // namespace shuntwright::bridge::reference
