#include "driver/rack/live_rack.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <optional>
#include <utility>

#include "driver/core/async.h"

namespace shuntwright::rack {

namespace {

using description::Rack;

/// What opening one device came to; filled by concurrent coroutines.
struct Opened {
  std::unique_ptr<device::Device> device;
  device::Identity identity;
  std::optional<Error> error;
};

Task<void> openOne(const description::Device& described, const transport::Opener& opener, Clock& clock,
                   Opened& into) {
  auto device = co_await device::Device::open(described, opener, clock);
  if (!device) {
    into.error = std::move(device.error());
    co_return;
  }
  into.device = std::move(*device);
  if (!described.profile->identify) co_return;
  auto identity = co_await into.device->identify();
  if (!identity) {
    into.error = std::move(identity.error());
    co_return;
  }
  into.identity = std::move(*identity);
}

/// The one excitation that the channels of a device ask for.
Result<std::optional<units::Voltage>> excitationOf(const Rack& rack, const std::string& device) {
  const description::Channel* first = nullptr;
  for (const auto& channel : rack.channels) {
    if (channel.device != device) continue;
    if (!first) first = &channel;
    if (channel.excitation != first->excitation) {
      return fail(ErrorCode::bad_use,
                  "device " + device + " has one excitation for all inputs, and channels " + first->name + " and " +
                      channel.name + " ask for different ones",
                  channel.place.text(), "give both the same excitation");
    }
  }
  if (!first) return std::optional<units::Voltage>();
  return std::optional<units::Voltage>(first->excitation);
}

}  // namespace

LiveRack::~LiveRack() { close(); }

void LiveRack::close() {
  for (auto& [name, device] : devices_) device->close();
}

units::Frequency LiveRack::rateOf(const description::Device& device) {
  if (device.rate) return *device.rate;
  const auto& inputs = device.profile->inputs;
  return inputs && !inputs->rates.empty() ? inputs->rates.front() : 10.0 * units::hertz;
}

Task<Result<std::unique_ptr<LiveRack>>> LiveRack::open(const Rack& rack, transport::Opener opener, Clock& clock,
                                                       RelayJournal& journal, LiveRackOptions options) {
  std::unique_ptr<LiveRack> live(new LiveRack(rack, clock));
  std::vector<const description::Device*> wanted;
  for (const auto& described : rack.devices) {
    const auto& only = options.onlyDevices;
    if (!only.empty() && std::find(only.begin(), only.end(), described.name) == only.end()) continue;
    wanted.push_back(&described);
    if (options.lockFolder.empty()) continue;
    if (described.port.kind == description::Port::Kind::replay) continue;
    auto lock = PortLock::take(options.lockFolder, described.port);
    if (!lock) co_return std::unexpected(std::move(lock.error()).wrap("cannot use device " + described.name));
    live->locks_.push_back(std::move(*lock));
  }

  std::vector<Opened> opened(wanted.size());
  std::vector<std::function<Task<void>()>> bodies;
  for (std::size_t k = 0; k < wanted.size(); ++k) {
    bodies.push_back([described = wanted[k], &opener, &clock, into = &opened[k]]() -> Task<void> {
      return openOne(*described, opener, clock, *into);
    });
  }
  co_await whenAll(std::move(bodies));

  RelayGuard::Devices devices;
  for (std::size_t k = 0; k < wanted.size(); ++k) {
    if (opened[k].error) co_return std::unexpected(std::move(*opened[k].error));
    const std::string& deviceName = wanted[k]->name;
    devices[deviceName] = opened[k].device.get();
    live->devices_[deviceName] = std::move(opened[k].device);
    live->identities_[deviceName] = std::move(opened[k].identity);
  }
  live->guard_ = std::make_unique<RelayGuard>(std::move(devices), journal, clock);
  co_return live;
}

Task<Result<void>> LiveRack::prepare(LoadPathPermit) {
  if (auto released = co_await guard_->openEvery(); !released) co_return released;
  for (auto& [deviceName, device] : devices_) {
    if (!device->described().profile->inputs) continue;
    auto excitation = excitationOf(rack_, deviceName);
    if (!excitation) co_return std::unexpected(excitation.error());
    if (*excitation) {
      if (auto set = co_await device->setExcitation(**excitation); !set) co_return set;
    }
    if (auto set = co_await device->setRate(rateOf(device->described())); !set) co_return set;
  }
  co_return Result<void>{};
}

}  // namespace shuntwright::rack
