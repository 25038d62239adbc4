#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <functional>
#include <memory>
#include <set>
#include <string>
#include <vector>

#include "driver/device/device.h"

namespace shuntwright::test {

/// A relay board without wires: relays are a set, every operation is noted and may be made to fail.
class FakeRelayBoard : public device::Device {
 public:
  explicit FakeRelayBoard(std::string name, int relays = 8, bool readBack = true) {
    auto profile = std::make_shared<description::Profile>();
    profile->relays.emplace();
    profile->relays->count = relays;
    if (readBack) profile->relays->state.emplace();
    described_.name = std::move(name);
    described_.profile = profile;
  }

  std::set<int> closed, welded, dead;
  std::vector<std::string> log;
  Clock* clock = nullptr;  ///< with `openingTakes`
  Nanoseconds openingTakes{0};
  std::function<Result<void>(const std::string& operation)> fails = [](const std::string&) { return Result<void>{}; };

  const description::Device& described() const override { return described_; }
  Task<Result<device::Identity>> identify() override { co_return device::Identity{}; }
  Task<Result<void>> setRate(units::Frequency) override { co_return Result<void>{}; }
  Task<Result<void>> setExcitation(units::Voltage) override { co_return Result<void>{}; }
  Task<Result<void>> closeRelay(int relay) override {
    auto done = note("close " + std::to_string(relay));
    if (done && !dead.contains(relay)) closed.insert(relay);
    co_return done;
  }
  Task<Result<void>> openRelay(int relay) override {
    auto done = note("open " + std::to_string(relay));
    if (done && !welded.contains(relay)) closed.erase(relay);
    co_return done;
  }
  Task<Result<void>> openAllRelays() override {
    if (clock) co_await waitFor(*clock, openingTakes);
    auto done = note("open all");
    if (done) std::erase_if(closed, [this](int relay) { return !welded.contains(relay); });
    co_return done;
  }
  Task<Result<bool>> relayClosed(int relay) override { co_return closed.contains(relay); }
  Task<Result<void>> start(units::Frequency) override { co_return Result<void>{}; }
  Task<Result<device::SampleBlock>> next(Instant) override {
    co_return fail(ErrorCode::not_found, "a relay board has no samples");
  }
  device::SampleBlock rest() override { return {}; }
  Task<Result<void>> stop() override { co_return Result<void>{}; }
  void close() override {}

 protected:
  description::Device described_;

 private:
  Result<void> note(const std::string& operation) {
    log.push_back(operation);
    return fails(operation);
  }
};

}  // namespace shuntwright::test
