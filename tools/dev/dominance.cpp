#include "tools/dev/dominance.h"

#include <algorithm>
#include <functional>
#include <memory>

#include "tools/dev/coverage.h"

namespace shuntwright::dev {

using namespace units;
using description::Channel;
using description::Rack;

namespace {

constexpr Fraction kNext = 1e-7 * one;  // next to nothing

description::Inputs& inputsOf(Rack& rack) {
  auto& device = rack.devices.front();
  auto profile = std::make_shared<description::Profile>(*device.profile);
  device.profile = profile;
  return *profile->inputs;
}

description::Relays& relaysOf(Rack& rack) {
  auto& device = rack.devices.back();
  auto profile = std::make_shared<description::Profile>(*device.profile);
  device.profile = profile;
  return *profile->relays;
}

Channel& channelOf(Rack& rack, const std::string& name) {
  return *std::ranges::find(rack.channels, name, &Channel::name);
}

void eachLead(Channel& channel, const std::function<void(description::Lead&)>& change) {
  for (auto& [terminal, lead] : channel.leads) change(lead);
}

/// Everything known next to exactly.
Rack quiet(Rack rack) {
  for (auto& [name, sheet] : rack.gauges) {
    sheet.resistance.tolerance = kNext;
    sheet.factorTolerance = kNext;
  }
  for (auto& [name, resistor] : rack.resistors) {
    resistor.tolerance = {};
    resistor.expandedUncertainty = kNext;
    resistor.coverageFactor = 2;
    resistor.temperatureCoefficient = {};
  }
  for (auto& channel : rack.channels) {
    channel.unbalance = description::Unbalance::gauge_off_nominal;
    if (channel.measuredResistance) channel.measuredResistance->tolerance = kNext;
    if (auto& sheet = channel.transducer) {
      sheet->sensitivityTolerance = sheet->inputTolerance = sheet->outputTolerance = kNext;
    }
    eachLead(channel, [](auto& lead) {
      lead.tolerance = kNext;
      lead.temperatureTolerance = 0.0 * kelvin;
    });
  }
  auto& inputs = inputsOf(rack);
  for (auto& offered : inputs.completions) offered.tolerance = kNext;
  inputs.halfBridge.tolerance = kNext;
  inputs.zeroStability = {};
  inputs.resolution = 1e-11 * volt_per_volt;
  auto& relays = relaysOf(rack);
  relays.contactTolerance = {};
  relays.leakage.reset();
  return rack;
}

sim::Imperfections silent() {
  sim::Imperfections out;
  out.noise = 1e-10 * volt_per_volt;
  out.mains = out.offset = out.drift = Ratio();
  out.leads = out.completions = 0;
  return out;
}

struct Campaign {
  const char* input;
  const char* channel;
  const char* quantity;
  /// States the input at a share of what it is.
  std::function<void(Rack&, Channel&, double share)> state;
  std::function<void(sim::Imperfections&)> also = {};
  bool scatter = false;  ///< the readings' own: the driver is told of a share of it
};

const std::vector<Campaign>& campaigns() {
  static const auto longLeads = [](Channel& channel) {
    eachLead(channel, [](auto& lead) { lead.resistance = 10.0 * ohm; });
  };
  static const auto noisy = [](sim::Imperfections& i) { i.noise = 2e-5 * volt_per_volt; };
  static const std::vector<Campaign> all{
      {"shunt resistor, tolerance", "Q3", "span",
       [](Rack& rack, Channel& channel, double share) {
         auto& resistor = rack.resistors.at(channel.shunts[0].resistor);
         resistor.expandedUncertainty = {};
         resistor.tolerance = share * 0.2 * percent;
       }},
      {"shunt resistor, certificate", "Q3", "span",
       [](Rack& rack, Channel& channel, double share) {
         rack.resistors.at(channel.shunts[0].resistor).expandedUncertainty = share * 0.2 * percent;
       }},
      {"shunt resistor, temperature", "Q3", "span",
       [](Rack& rack, Channel& channel, double share) {
         auto& resistor = rack.resistors.at(channel.shunts[0].resistor);
         resistor.temperatureCoefficient = 1e-4 * per_kelvin;
         resistor.temperatureSpan = share * 20.0 * kelvin;
       }},
      {"contact of the relay", "Q3", "span",
       [](Rack& rack, Channel&, double share) {
         auto& relays = relaysOf(rack);
         relays.contactResistance = 400.0 * ohm;
         relays.contactTolerance = share * 400.0 * ohm;
       }},
      {"leakage of the open relay", "Q3", "span",
       [](Rack& rack, Channel&, double share) { relaysOf(rack).leakage = 20.0 / share * megaohm; }},
      {"gauge resistance, packet", "HP", "strain at 100 %",
       [](Rack& rack, Channel&, double share) {
         for (auto& [name, sheet] : rack.gauges) sheet.resistance.tolerance = share * 0.5 * percent;
       }},
      {"gauge resistance, measured", "HP", "strain at 100 %",
       [](Rack&, Channel& channel, double share) {
         channel.arms[1].emplace().resistance = description::Toleranced{350.0 * ohm, share * 0.5 * percent};
       }},
      {"completion resistor", "Q3", "span",
       [](Rack& rack, Channel&, double share) {
         for (auto& offered : inputsOf(rack).completions) offered.tolerance = share * 0.3 * percent;
       },
       [](sim::Imperfections& i) { i.completions = 1; }},
      {"half-bridge resistor", "HB", "span",
       [](Rack& rack, Channel&, double share) {
         inputsOf(rack).halfBridge.tolerance = share * 0.3 * percent;
       },
       [](sim::Imperfections& i) { i.completions = 1; }},
      {"lead resistance", "HB", "strain at 100 %",
       [](Rack&, Channel& channel, double share) {
         longLeads(channel);
         eachLead(channel, [&](auto& lead) { lead.tolerance = share * 10.0 * percent; });
       },
       [](sim::Imperfections& i) { i.leads = 1; }},
      {"lead temperature at calibration", "HB", "strain at 100 %",
       [](Rack&, Channel& channel, double share) {
         longLeads(channel);
         eachLead(channel, [&](auto& lead) { lead.temperatureTolerance = share * 30.0 * kelvin; });
       }},
      {"leads warming until the test", "Q2", "strain at 0",
       [](Rack&, Channel& channel, double share) {
         eachLead(channel, [&](auto& lead) { lead.temperatureTolerance = share * 10.0 * kelvin; });
       }},
      {"gauge factor", "Q3", "100 % with gauge factor",
       [](Rack& rack, Channel&, double share) {
         for (auto& [name, sheet] : rack.gauges) sheet.factorTolerance = share * 2.0 * percent;
       }},
      {"input resistance of the transducer", "LC", "strain at 100 %",
       [](Rack&, Channel& channel, double share) {
         channel.transducer->inputResistance = 420.0 * ohm;
         channel.transducer->inputTolerance = share * 10.0 * percent;
       }},
      {"output resistance of the transducer", "LC", "strain at 100 %",
       [](Rack&, Channel& channel, double share) {
         channel.transducer->outputTolerance = share * 1.0 * percent;
       }},
      {"noise of the steps", "Q3", "span", [](Rack&, Channel&, double) {}, noisy, true},
      {"noise of zero and reading", "Q3", "strain at 0", [](Rack&, Channel&, double) {}, noisy, true},
      {"resolution of the steps", "Q3", "span",
       [](Rack& rack, Channel&, double share) { inputsOf(rack).resolution = share * 1e-5 * volt_per_volt; }},
      {"resolution of zero and reading", "Q3", "strain at 50 %",
       [](Rack& rack, Channel&, double share) { inputsOf(rack).resolution = share * 1e-5 * volt_per_volt; },
       [](sim::Imperfections& i) { i.offset = 1e-4 * volt_per_volt; }},
      {"stability of the amplifier", "Q3", "strain at 0",
       [](Rack& rack, Channel&, double share) {
         inputsOf(rack).zeroStability = share * 1e-5 * volt_per_volt;
       }},
  };
  return all;
}

Result<double> inside(const Rack& told, const Rack& truth, const Campaign& campaign, int racks,
                      std::uint64_t seed, double scatter) {
  CoverageOptions options;
  options.racks = racks;
  options.trials = 0;
  options.seed = seed;
  options.truth = &truth;
  options.imperfections = silent();
  options.scatter = scatter;
  if (campaign.also) campaign.also(options.imperfections);
  const auto found = coverageOf(told, campaign.channel, options);
  if (!found) return std::unexpected(found.error());
  return std::ranges::find(*found, campaign.quantity, &Coverage::quantity)->gum_percent;
}

}  // namespace

Result<std::vector<Dominance>> dominanceOf(const Rack& everyCircuit, int racks, std::uint64_t seed) {
  std::vector<Dominance> out;
  const Rack base = quiet(everyCircuit);
  for (const Campaign& campaign : campaigns()) {
    Rack truth = base, halved = base;
    campaign.state(truth, channelOf(truth, campaign.channel), 1);
    campaign.state(halved, channelOf(halved, campaign.channel), 0.5);
    const auto stated = inside(truth, truth, campaign, racks, seed, 1);
    if (!stated) return std::unexpected(stated.error());
    const auto half = inside(halved, truth, campaign, racks, seed, campaign.scatter ? 0.5 : 1);
    if (!half) return std::unexpected(half.error());
    out.push_back({campaign.input, campaign.channel, campaign.quantity, racks, *stated, *half});
  }
  return out;
}

}  // namespace shuntwright::dev
