#pragma once

#include <array>
#include <span>

#include "driver/core/error.h"
#include "driver/description/rack.h"
#include "driver/description/wiring.h"
#include "driver/units/units.h"

namespace shuntwright::bridge {

/// One arm: its resistance unstrained, and by how much of itself it changes per strain of the channel
/// (gauge factor times the arm's weight; 0 for a resistor that is no gauge).
struct Arm {
  units::Resistance resistance;
  double relativePerStrain = 0;
};

/// A bridge as wired: everything between the amplifier's terminals and the specimen, as resistors.
///
/// Arms 1..4 stand at index 0..3 (numbered as description::CircuitKind says). Leads are indexed by the
/// Terminal they start at; a lead that the kind does not have is ignored. The ratio is the voltage between
/// SIG+ and SIG- at the instrument over the excitation, which is taken at the instrument's EXC terminals, or
/// at its SENSE terminals when `sensed`.
struct Circuit {
  description::CircuitKind kind = description::CircuitKind::quarter_3_wire;
  bool sensed = false;
  std::array<Arm, 4> arms;
  std::array<units::Resistance, description::kTerminals> leads{};
  units::Resistance inputResistance = 1.0 * units::gigaohm;  ///< between SIG+ and SIG-
  units::Resistance excitationSeries;  ///< inside a transducer, in each excitation line: (R_in - R_out)/2

  units::Resistance& lead(description::Terminal t) { return leads[static_cast<std::size_t>(t)]; }
  units::Resistance lead(description::Terminal t) const { return leads[static_cast<std::size_t>(t)]; }
};

/// A resistor between two terminals, on one side of the leads. On the gauge side COMP and SIG+ of a 3-wire
/// quarter bridge are one point, as the leads meet at the gauge's tab.
struct ShuntPath {
  std::pair<description::Terminal, description::Terminal> across;
  description::Side side = description::Side::instrument;
  units::Resistance resistance;
};

/// The circuit of a rack's channel with every value nominal (measured gauge resistance where the rack gives
/// one, leads at their stated temperature). A transducer is four arms of its output resistance with
/// (R_in - R_out)/2 in each excitation line; its "strain" is the fraction of the rated value and the arms'
/// relativePerStrain is such that strain 1 gives the stated sensitivity at the transducer's own terminals.
/// With a certificate's shunt the arms are as that shunt sees them (armOf).
Circuit circuitOf(const description::Rack& rack, const description::Channel& channel);

/// Resistance of each of a transducer's four arms: its output resistance, or, where the certificate has a
/// shunt, the one at which that shunt gives the certificate's step at no load (trimming resistors inside
/// included). Errors: bad_use when no resistance within a factor of 2 of the output resistance gives it.
Result<units::Resistance> armOf(const description::TransducerSheet& sheet);

/// The shunt's path: resistor value plus the relay's contact resistance, and what an open relay that leaks
/// takes away from the step: the leak was there before. Its conductance is anywhere between none and that of
/// the stated insulation; the middle is taken.
ShuntPath pathOf(const description::Rack& rack, const description::Shunt& shunt);

/// By how much larger a shunt resistor looks because its relay, when open, lets through what this insulation
/// does.
units::Resistance leakEquivalent(units::Resistance shunt, units::Resistance leakage);

/// True when the terminals exist in this circuit on that side and are not one point.
bool exists(const Circuit& circuit, const ShuntPath& path);

/// The exact ratio at a strain with these shunts connected, by a nodal solve of the whole network.
/// Leads may be 0 ohm. Errors: bad_use when a shunt's terminals do not exist in the circuit; bad_use when
/// a resistance is negative or an arm is not positive at that strain.
Result<units::Ratio> ratio(const Circuit& circuit, units::Strain strain,
                           std::span<const ShuntPath> shunts = {});

}  // namespace shuntwright::bridge
