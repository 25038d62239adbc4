#include "sim/amplifier/bench.h"

#include <algorithm>
#include <cmath>
#include <functional>
#include <map>

#include "sim/amplifier/text_device.h"

namespace shuntwright::sim {

using namespace units;
using description::RelayRef;

struct Bench::State {
  State(const description::Rack& describedRack, const Scenario& described, Random randomSource, Instant start)
      : rack(describedRack),
        scenario(described),
        random(randomSource),
        specimen(describedRack, described, randomSource.fork(1)) {
    clock.start = start;
  }

  const description::Rack& rack;
  Scenario scenario;
  Random random;
  Specimen specimen;
  LoadClock clock;
  std::map<std::string, std::unique_ptr<BridgeInput>> inputs;  ///< by channel
  std::map<std::string, std::unique_ptr<TextDevice>> devices;
  std::map<RelayRef, std::vector<std::pair<BridgeInput*, std::size_t>>> wiring;  ///< relay -> shunts it really works
  std::vector<RelayEvent> events;
  Random contactRandom{0};

  void contact(const RelayRef& relay, bool closed, Instant when);
};

void Bench::State::contact(const RelayRef& relay, bool closed, Instant when) {
  events.push_back({when, relay, closed});
  const auto found = wiring.find(relay);
  if (found == wiring.end()) return;
  for (auto& [name, device] : devices) device->sampleBefore(when);
  const auto& described = *rack.device(relay.device)->profile->relays;
  for (const auto& [input, shunt] : found->second) {
    input->touch(when);
    auto& one = input->channel().shunts()[shunt];
    one.closed = closed;
    if (closed) {
      one.contact_ohm = described.contactResistance.in(ohm) +
                        scenario.imperfections.contacts * described.contactTolerance.in(ohm) * contactRandom.uniform(-1, 1);
    }
    input->contactChanged(when, closed);
  }
}

namespace {

/// Half of the excitation stands across each gauge.
double gridPower_kW_per_m2(const description::Rack& rack, const description::Channel& channel) {
  if (channel.transducer || !rack.gaugeOf(channel).gridArea) return 0;
  const auto& sheet = rack.gaugeOf(channel);
  const double half_V = channel.excitation.in(volt) / 2;
  return 1e-3 * half_V * half_V / sheet.resistance.value.in(ohm) / sheet.gridArea->in(square_metre);
}

}  // namespace

Bench::Bench(const description::Rack& rack, const Scenario& scenario, std::uint64_t seed, Instant start)
    : state_(std::make_unique<State>(rack, scenario, Random(seed), start)) {
  State& s = *state_;
  s.contactRandom = s.random.fork(2);
  Shared shared{.hall = Hall::drawn(s.random.fork(3)),
                .resistors = drawnResistors(rack, s.scenario.imperfections, s.random.fork(5))};
  Random packets = s.random.fork(4);
  std::map<std::string, double> batches;
  for (const auto& [name, sheet] : rack.gauges) batches[name] = packets.uniform(-1, 1);
  std::uint64_t stream = 100;
  for (const auto& channel : rack.channels) {
    const auto faults = s.scenario.channels.contains(channel.name) ? s.scenario.channels.at(channel.name) : ChannelFaults{};
    if (!channel.gauge.empty()) shared.batch = batches.at(channel.gauge);
    TrueChannel truth(rack, channel, s.scenario.imperfections, faults, s.random.fork(stream++), shared);
    s.inputs[channel.name] = std::make_unique<BridgeInput>(
        std::move(truth), s.specimen, s.clock, *rack.device(channel.device)->profile->inputs, s.scenario.imperfections,
        faults, s.random.fork(stream++), gridPower_kW_per_m2(rack, channel));
  }
  // Which relay really works which shunt: as the rack says, but for the swapped ones.
  const auto really = [&](RelayRef relay) {
    for (const auto& [a, b] : s.scenario.swapped) {
      if (relay == a) return b;
      if (relay == b) return a;
    }
    return relay;
  };
  for (auto& [name, input] : s.inputs) {
    const auto& shunts = input->channel().shunts();
    for (std::size_t k = 0; k < shunts.size(); ++k) {
      s.wiring[really(shunts[k].described.relay)].emplace_back(input.get(), k);
    }
  }
  for (const auto& described : rack.devices) {
    const auto& profile = described.profile;
    std::vector<BridgeInput*> inputs;
    if (profile->inputs) {
      inputs.assign(static_cast<std::size_t>(profile->inputs->count), nullptr);
      for (const auto& channel : rack.channels) {
        if (channel.device != described.name) continue;
        inputs[static_cast<std::size_t>(channel.input - profile->inputs->first)] = s.inputs.at(channel.name).get();
      }
    }
    std::unique_ptr<RelayBoard> relays;
    if (profile->relays) {
      relays = std::make_unique<RelayBoard>(*profile->relays, s.random.fork(stream++),
                                            [state = &s, device = described.name](int relay, bool closed, Instant when) {
                                              state->contact(RelayRef{device, relay}, closed, when);
                                            });
      for (const auto& relay : s.scenario.dead) {
        if (relay.device == described.name && relays->has(relay.relay)) relays->setDead(relay.relay);
      }
      for (const auto& relay : s.scenario.welded) {
        if (relay.device == described.name && relays->has(relay.relay)) relays->setWelded(relay.relay);
      }
    }
    const auto faults = s.scenario.devices.contains(described.name) ? s.scenario.devices.at(described.name) : DeviceFaults{};
    const std::string serial = described.serialNumber.empty() ? "SIM-" + described.name : described.serialNumber;
    s.devices[described.name] = std::make_unique<TextDevice>(profile, std::move(inputs), std::move(relays), faults,
                                                             s.scenario.imperfections, start,
                                                             s.random.fork(stream++), serial);
  }
}

Bench::~Bench() = default;
Bench::Bench(Bench&&) noexcept = default;

Device& Bench::device(const std::string& name) { return *state_->devices.at(name); }

Bench::Truth Bench::truth(const std::string& channel, Instant when) const {
  const BridgeInput& input = *state_->inputs.at(channel);
  Truth truth;
  truth.strain = input.strainAt(when) * strain;
  truth.gaugeFactor = GaugeFactor(input.channel().gaugeFactor());
  truth.gaugeResistance = input.channel().gauge_ohm() * ohm;
  truth.noiselessRatio = input.trueRatioAt(when) * volt_per_volt;
  truth.amplifierSpan = input.span();
  return truth;
}

bool Bench::relayClosed(const RelayRef& relay) const {
  auto* board = state_->devices.at(relay.device)->relays();
  return board && board->closed(relay.relay);
}

std::vector<RelayRef> Bench::closedRelays() const {
  std::vector<RelayRef> closed;
  for (const auto& [name, device] : state_->devices) {
    auto* board = device->relays();
    if (!board) continue;
    const auto& described = *state_->rack.device(name)->profile->relays;
    for (int k = 0; k < described.count; ++k) {
      if (board->closed(described.first + k)) closed.push_back({name, described.first + k});
    }
  }
  return closed;
}

const std::vector<Bench::RelayEvent>& Bench::relayEvents() const { return state_->events; }

void Bench::startLoad(Instant when) { state_->clock.loadStart = when; }

}  // namespace shuntwright::sim
