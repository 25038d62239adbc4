#include "driver/correction/derived_channels.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <map>
#include <numbers>
#include <optional>

#include "driver/mechanics/pair.h"
#include "driver/mechanics/rosette.h"
#include "driver/mechanics/thermal.h"
#include "driver/mechanics/transverse.h"

namespace shuntwright::correction {

using namespace units;
using description::CircuitKind;

namespace {

constexpr float kNoValue = std::numeric_limits<float>::quiet_NaN();
constexpr Nanoseconds kTemperatureHolds = std::chrono::minutes(1);
/// No direction is stated below it: it would be that of the noise.
constexpr Strain kLeastShear = 1.0 * microstrain;

/// A thermometer's place and what it showed last.
struct Thermometer {
  std::size_t device = 0, column = 0;
  float latest_C = kNoValue;
  Instant when = Instant::min();

  float at(Instant now) const {
    return when != Instant::min() && now - when <= kTemperatureHolds ? latest_C : kNoValue;
  }
};

/// Columns are counted over the widened row, inputs first.
struct MechanicalStrain {
  std::size_t from = 0;
  const Thermometer* thermometer = nullptr;  ///< null: no thermal effects to take out
  mechanics::ThermalBehaviour behaviour;
  GaugeFactor used;
  Temperature zero;
  TemperatureDifference thermometerError;  ///< by which it was off at the zero, where the rack knows better
  double alongGrid = 1;                    ///< factor for strain across the grid

  float of(float shown, Instant now) const {
    Strain e = static_cast<double>(shown) * microstrain;
    if (thermometer) {
      const float t_C = thermometer->at(now);
      if (std::isnan(t_C)) return kNoValue;
      e = mechanics::withoutThermalEffects(
          e, used, behaviour, Temperature::celsius(static_cast<double>(t_C)) + -thermometerError, zero);
    }
    return static_cast<float>((e * alongGrid).in(microstrain));
  }
};

struct Spot {
  mechanics::Rosette rosette;
  mechanics::Elastic elastic;
  std::vector<std::size_t> from;
};

struct Faces {
  std::vector<std::size_t> from;
  double firstPart = 0.5;
};

struct OnDevice {
  std::size_t inputs = 0;
  std::vector<Thermometer*> thermometers;
  std::vector<MechanicalStrain> strains;
  std::vector<Spot> spots;
  std::vector<Faces> pairs;
  std::vector<DerivedColumn> columns;
};

/// Gauges of these circuits all feel temperature with the same sign; in the others they cancel each other.
bool showsThermalOutput(CircuitKind kind) {
  return kind == CircuitKind::quarter_2_wire || kind == CircuitKind::quarter_3_wire ||
         kind == CircuitKind::half_opposite;
}

mechanics::TransverseSensitivity transverseOf(const description::GaugeSheet& gauge) {
  return {gauge.transverseSensitivity.value_or(0.0 * one), gauge.transversePoisson};
}

void putPrincipal(const Spot& spot, const float* row, float* out) {
  mechanics::Readings shown;
  for (std::size_t k = 0; k < spot.from.size(); ++k)
    shown[k] = static_cast<double>(row[spot.from[k]]) * microstrain;
  const auto p = mechanics::principalOf(spot.rosette.strainOf(shown), spot.elastic, kLeastShear);
  const double values[] = {
      p.major.in(microstrain),
      p.minor.in(microstrain),
      p.angle_rad ? *p.angle_rad * 180 / std::numbers::pi : static_cast<double>(kNoValue),
      p.shear.in(microstrain),
      p.majorStress.in(megapascal),
      p.minorStress.in(megapascal),
      p.equivalent.in(megapascal)};
  std::ranges::transform(values, out, [](double v) { return static_cast<float>(v); });
}

constexpr struct {
  const char *suffix, *unit;
} kSpotColumns[] = {{".major", "microstrain"},    {".minor", "microstrain"}, {".angle", "deg"},
                    {".shear", "microstrain"},    {".major_stress", "MPa"},  {".minor_stress", "MPa"},
                    {".equivalent_stress", "MPa"}};

}  // namespace

struct DerivedChannels::State {
  std::map<std::string, Thermometer> thermometers;  // by channel; places in a map stand still
  std::vector<OnDevice> devices;
};

namespace {

/// Puts the plan together, channel by channel, then what stands on channels.
class Planner {
 public:
  Planner(const description::Rack& rack, const calibration::Record& record,
          std::span<const LiveCorrection> corrections, std::map<std::string, Thermometer>& thermometers,
          std::vector<OnDevice>& devices)
      : rack_(rack),
        record_(record),
        corrections_(corrections),
        thermometers_(thermometers),
        devices_(devices) {}

  Result<void> plan() {
    for (std::size_t d = 0; d < corrections_.size(); ++d) {
      devices_.emplace_back();
      devices_[d].inputs = corrections_[d].columns().size();
    }
    for (const auto& channel : rack_.channels) {
      if (auto planned = planChannel(channel); !planned) return planned;
    }
    for (const auto& rosette : rack_.rosettes) planRosette(rosette);
    for (const auto& pair : rack_.pairs) planPair(pair);
    return {};
  }

 private:
  struct At {
    std::size_t device, column;
    bool calibrated;
  };

  std::optional<At> find(const std::string& channel) const {
    for (std::size_t d = 0; d < corrections_.size(); ++d) {
      const auto& columns = corrections_[d].columns();
      const auto found = std::ranges::find(columns, channel, &Column::channel);
      if (found != columns.end())
        return At{d, static_cast<std::size_t>(found - columns.begin()), found->calibrated};
    }
    return {};
  }

  /// Where the strain of a gauge is taken from: its mechanical column when it has one.
  std::size_t strainColumn(const std::string& channel, std::size_t fallback) const {
    const auto found = mechanical_.find(channel);
    return found == mechanical_.end() ? fallback : found->second;
  }

  void add(OnDevice& device, std::string name, std::string unit, bool calibrated) {
    device.columns.push_back({std::move(name), std::move(unit), calibrated});
  }

  Result<void> planChannel(const description::Channel& channel) {
    if (channel.transducer) return {};
    const auto& gauge = rack_.gaugeOf(channel);
    MechanicalStrain strain;
    strain.used = gauge.factor;
    strain.behaviour.factorSlope = gauge.factorSlope;
    strain.behaviour.factorTemperature = gauge.factorTemperature;
    if (gauge.thermalOutput && showsThermalOutput(channel.circuit))
      strain.behaviour.output = *gauge.thermalOutput;
    const bool thermal =
        !channel.temperature.empty() &&
        (!strain.behaviour.output.coefficients_microstrain.empty() || gauge.factorSlope.in(per_kelvin) != 0);
    const bool across = channel.fieldRatio && gauge.transverseSensitivity;
    const auto own = find(channel.name);
    if (!own || (!thermal && !across)) return {};
    if (thermal) {
      auto thermometer = thermometerOf(channel, strain);
      if (!thermometer) return std::unexpected(std::move(thermometer.error()));
      strain.thermometer = *thermometer;
    }
    if (across)
      strain.alongGrid = mechanics::alongGrid(transverseOf(gauge), 1.0 * units::strain, *channel.fieldRatio)
                             .in(units::strain);
    strain.from = own->column;
    auto& device = devices_[own->device];
    mechanical_[channel.name] = device.inputs + device.columns.size();
    add(device, channel.name + ".mechanical", "microstrain", own->calibrated);
    device.strains.push_back(std::move(strain));
    return {};
  }

  Result<Thermometer*> thermometerOf(const description::Channel& channel, MechanicalStrain& strain) {
    const auto at = find(channel.temperature);
    const auto* result = record_.channel(channel.temperature);
    if (!at || !result) {
      return fail(ErrorCode::not_found,
                  "the thermometer " + channel.temperature + " of channel " + channel.name + " is not there",
                  channel.place.text(), "record the device that it is on, and calibrate the whole rack");
    }
    // Both zeros were taken together, so what it showed then is the gauge's temperature at zero.
    const auto shown = Temperature::celsius(result->correction.strainAt(result->zero.in(volt_per_volt)) *
                                            result->unitsPerStrain);
    strain.zero = channel.zeroTemperature.value_or(shown);
    strain.thermometerError = shown - strain.zero;
    const auto [entry, first] =
        thermometers_.try_emplace(channel.temperature, Thermometer{at->device, at->column});
    if (first) devices_[at->device].thermometers.push_back(&entry->second);
    return &entry->second;
  }

  void planRosette(const description::Rosette& rosette) {
    std::array<mechanics::TransverseSensitivity, 3> transverse;
    std::vector<std::size_t> from;
    std::optional<std::size_t> device;
    bool calibrated = true;
    for (std::size_t k = 0; k < rosette.channels.size(); ++k) {
      const auto at = find(rosette.channels[k]);
      if (!at) return;
      device = at->device;
      calibrated = calibrated && at->calibrated;
      from.push_back(strainColumn(rosette.channels[k], at->column));
      transverse[k] = transverseOf(rack_.gaugeOf(*rack_.channel(rosette.channels[k])));
    }
    auto& on = devices_[*device];
    on.spots.push_back({mechanics::Rosette(rosette.layout, transverse),
                        {rosette.modulus, rosette.poisson},
                        std::move(from)});
    for (const auto& column : kSpotColumns) add(on, rosette.name + column.suffix, column.unit, calibrated);
  }

  void planPair(const description::Pair& pair) {
    const auto a = find(pair.channels[0]), b = find(pair.channels[1]);
    if (!a || !b) return;
    auto& on = devices_[a->device];
    on.pairs.push_back(
        {{strainColumn(pair.channels[0], a->column), strainColumn(pair.channels[1], b->column)},
         pair.firstPart});
    add(on, pair.name + ".axial", "microstrain", a->calibrated && b->calibrated);
    add(on, pair.name + ".bending", "microstrain", a->calibrated && b->calibrated);
  }

  const description::Rack& rack_;
  const calibration::Record& record_;
  std::span<const LiveCorrection> corrections_;
  std::map<std::string, Thermometer>& thermometers_;
  std::vector<OnDevice>& devices_;
  std::map<std::string, std::size_t> mechanical_;
};

}  // namespace

DerivedChannels::DerivedChannels() : state_(std::make_unique<State>()) {}
DerivedChannels::~DerivedChannels() = default;
DerivedChannels::DerivedChannels(DerivedChannels&&) noexcept = default;
DerivedChannels& DerivedChannels::operator=(DerivedChannels&&) noexcept = default;

Result<DerivedChannels> DerivedChannels::of(const description::Rack& rack, const calibration::Record& record,
                                            std::span<const LiveCorrection> corrections) {
  DerivedChannels out;
  Planner planner(rack, record, corrections, out.state_->thermometers, out.state_->devices);
  if (auto planned = planner.plan(); !planned) return std::unexpected(std::move(planned.error()));
  return out;
}

const std::vector<DerivedColumn>& DerivedChannels::columns(std::size_t device) const {
  static const std::vector<DerivedColumn> kNone;
  return device < state_->devices.size() ? state_->devices[device].columns : kNone;
}

bool DerivedChannels::wants(std::size_t device) const {
  return !columns(device).empty() ||
         (device < state_->devices.size() && !state_->devices[device].thermometers.empty());
}

void DerivedChannels::apply(std::size_t device, const device::SampleBlock& block,
                            std::span<const float> corrected, device::SampleBlock& out,
                            std::vector<float>& outCorrected) {
  OnDevice& on = state_->devices[device];
  const std::size_t inputs = block.inputs, width = inputs + on.columns.size(), frames = block.frames();
  out.inputs = width;
  out.time = block.time;
  out.lostBefore = block.lostBefore;
  out.damagedBefore = block.damagedBefore;
  out.ratio.assign(frames * width, kNoValue);
  out.flags.assign(frames * width, 0);
  outCorrected.resize(frames * width);
  for (std::size_t f = 0; f < frames; ++f) {
    float* row = outCorrected.data() + f * width;
    std::uint8_t* flags = out.flags.data() + f * width;
    std::copy_n(corrected.data() + f * inputs, inputs, row);
    std::copy_n(block.ratio.data() + f * inputs, inputs, out.ratio.data() + f * width);
    std::copy_n(block.flags.data() + f * inputs, inputs, flags);
    for (Thermometer* t : on.thermometers) {
      if (flags[t->column] != 0 || !std::isfinite(row[t->column])) continue;
      t->latest_C = row[t->column];
      t->when = block.time[f];
    }
    // The columns' order is that of the plan: strains, spots, pairs; the later may stand on the earlier.
    std::size_t at = inputs;
    for (const auto& strain : on.strains) {
      row[at] = strain.of(row[strain.from], block.time[f]);
      flags[at] = flags[strain.from];
      // Its gauge is there and its thermometer is not.
      if (std::isnan(row[at]) && !std::isnan(row[strain.from])) flags[at] |= device::kMissing;
      ++at;
    }
    const auto flagsOf = [flags](const std::vector<std::size_t>& from) {
      std::uint8_t all = 0;
      for (const std::size_t k : from) all = static_cast<std::uint8_t>(all | flags[k]);
      return all;
    };
    for (const auto& spot : on.spots) {
      putPrincipal(spot, row, row + at);
      std::fill_n(flags + at, std::size(kSpotColumns), flagsOf(spot.from));
      at += std::size(kSpotColumns);
    }
    for (const auto& pair : on.pairs) {
      const auto parts =
          mechanics::axialAndBending(static_cast<double>(row[pair.from[0]]) * microstrain,
                                     static_cast<double>(row[pair.from[1]]) * microstrain, pair.firstPart);
      row[at] = static_cast<float>(parts.axial.in(microstrain));
      row[at + 1] = static_cast<float>(parts.bending.in(microstrain));
      std::fill_n(flags + at, 2, flagsOf(pair.from));
      at += 2;
    }
  }
}

}  // namespace shuntwright::correction
