#pragma once

#include <functional>
#include <string>
#include <vector>

#include "driver/bridge/circuit.h"
#include "driver/core/error.h"
#include "driver/description/rack.h"
#include "driver/metrology/model.h"

namespace shuntwright::calibration {

/// The physics behind one channel's correction, with every value that is not known exactly open to change.
struct ChannelModel {
  bridge::Circuit atCalibration;  ///< while the shunts were closed
  bridge::Circuit inTest;         ///< later, when strain is read: the leads may have warmed
  std::vector<bridge::ShuntPath> shunts;
  description::Unbalance cause = description::Unbalance::unknown;
};

/// The channel's model at its nominal values. With the lead loss in the span the model's leads are 0.
ChannelModel modelOf(const description::Rack& rack, const description::Channel& channel);
/// The same with the leads as the rack states them, whatever becomes of their loss.
ChannelModel modelWithLeads(const description::Rack& rack, const description::Channel& channel);

/// Mean of the leads that carry the excitation's current; 0 where none does.
units::Resistance meanLead(const bridge::Circuit& circuit);

/// The bridge brought into the state that its zero reading shows.
struct WorkingPoint {
  bridge::Circuit circuit;
  units::Strain standing;  ///< strain that is there at zero; 0 unless the cause is standing strain
};

/// Explains an unbalance by its stated cause: a gauge off nominal changes arm 1, a completion off nominal
/// changes arm 2 (its stated gauge stays as measured), a standing strain stays a strain; `unknown` is taken
/// as a gauge off nominal (what that choice may cost is a line of the budget).
/// Errors: bad_use when no such change gives the ratio (more than 30 % off nominal).
Result<WorkingPoint> explain(const bridge::Circuit& circuit, units::Ratio zero, description::Unbalance cause);

/// Carries what the zero reading said about one arm of `from` over to the circuit as it is in the test.
WorkingPoint moved(const WorkingPoint& point, const bridge::Circuit& from, const bridge::Circuit& to);

/// What the model says of a channel whose (true) zero ratio is known.
struct ScalePrediction {
  std::vector<units::Ratio> steps;  ///< of each shunt, from the working point at calibration
  double slope_per_strain = 0;      ///< dr/de at the working point in test, V/V per m/m
};
Result<ScalePrediction> predictScale(const ChannelModel& model, units::Ratio zero);

/// Amplifier's span from all shunts: weighted least squares of measured against predicted steps through the origin,
/// each by its weight (empty: all alike); a measured step that is NaN counts for nothing. 1 when they cannot give one
/// (no shunt measured, no predicted step).
double spanOf(const std::vector<units::Ratio>& measured, const std::vector<units::Ratio>& predicted,
              const std::vector<double>& weights = {});

/// One value that is not known exactly: what is known of it, and what moving it does to the model. Shifts are
/// applied in the order in which inputsOf() lists them.
struct UncertainInput {
  metrology::Input input;
  std::function<void(ChannelModel&, double delta)> shift;  ///< moves it by delta, in the input's unit
};

/// The quantity by which the leads' temperature changes between calibration and test.
inline constexpr const char* kLeadsWarming = "lead temperature, change until the test";

/// Everything about the circuit and the shunts that is not known exactly: resistors by tolerance or
/// certificate and temperature, relay contacts, gauges, completions, half bridge, a transducer's terminal
/// resistances, each lead, and the leads' temperature at calibration and its change until the test.
std::vector<UncertainInput> inputsOf(const description::Rack& rack, const description::Channel& channel);

}  // namespace shuntwright::calibration
