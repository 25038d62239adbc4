#pragma once

#include <array>
#include <optional>
#include <string_view>
#include <vector>

namespace shuntwright::description {

/// Screw terminals of a bridge input. `comp` is the end of the completion resistor that a 3-wire quarter
/// bridge brings out. A lead is named after the terminal it starts at.
enum class Terminal { exc_plus, exc_minus, sig_plus, sig_minus, comp, sense_plus, sense_minus };
inline constexpr std::size_t kTerminals = 7;

/// On which side of the leads a shunt is connected.
enum class Side { instrument, gauge };

/// Arms are numbered round the bridge: 1 SIG+ to EXC-, 2 EXC+ to SIG+, 3 EXC+ to SIG-, 4 SIG- to EXC-;
/// tension in arm 1 or 3 raises the ratio.
enum class CircuitKind {
  quarter_2_wire,      ///< gauge in arm 1, completion in arm 2 between EXC+ and SIG+, half bridge inside
  quarter_3_wire,      ///< gauge in arm 1; leads EXC-, COMP and SIG+; completion between EXC+ and COMP
  half_bending,        ///< arms 1 and 2, opposite strains; leads EXC+, SIG+, EXC-
  half_poisson,        ///< arm 1 along, arm 2 across: -nu times the strain
  half_opposite,       ///< arms 1 and 3 equal; leads EXC+, EXC-, SIG+, SIG-; completion in arms 2 and 4
  full_bending,        ///< +, -, +, -
  full_poisson,        ///< +, -nu, +, -nu
  full_bending_poisson,  ///< +, -nu, +nu, -
  full_shear,          ///< +, -, +, -, gauges at 45 degrees; the strain is gamma/2
  transducer,          ///< a bought load cell or the like: resistances, sensitivity, certificate
};

std::string_view name(Terminal terminal);        ///< "EXC+", "EXC-", "SIG+", "SIG-", "COMP", "SENSE+", "SENSE-"
std::string_view name(Side side);                ///< "instrument", "gauge"
std::string_view name(CircuitKind kind);         ///< "quarter 3-wire", "half bending", ..., "transducer"
std::optional<Terminal> terminalNamed(std::string_view text);
std::optional<CircuitKind> circuitNamed(std::string_view text);
std::vector<std::string_view> circuitNames();

/// The leads a circuit has, by the terminal each starts at. `sensed` adds SENSE+ and SENSE- (full bridges
/// and transducers only).
std::vector<Terminal> leadsOf(CircuitKind kind, bool sensed);

/// Whether a lead carries the excitation's current: through the gauge or to the bridge, not signal or sense.
bool carriesCurrent(CircuitKind kind, Terminal lead);

/// All four arms stand outside the instrument: only these can have sense leads.
bool isFull(CircuitKind kind);

/// The terminals of a circuit on one side: at the gauge the far ends of its leads, at the instrument its
/// leads and the amplifier's own EXC and SIG terminals.
std::vector<Terminal> terminalsOf(CircuitKind kind, bool sensed, Side side);

/// True when two terminals are the same node there: at the gauge COMP and SIG+, and EXC and SENSE.
bool onePoint(Terminal a, Terminal b, Side side);

/// For each arm, the factor on the channel's strain: +1, -1, -nu, +nu, or 0 for a resistor that is no
/// gauge. Shape: arms 1..4 at index 0..3. For a transducer: +1, -1, +1, -1.
std::array<double, 4> armWeights(CircuitKind kind, double poisson);

}  // namespace shuntwright::description
