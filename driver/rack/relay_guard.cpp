#include "driver/rack/relay_guard.h"

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/cancellation_state.hpp>
#include <boost/asio/this_coro.hpp>
#include <exception>
#include <utility>

#include "driver/core/async.h"
#include "driver/description/profile.h"

namespace shuntwright::rack {

namespace asio = boost::asio;
using description::RelayRef;

namespace {

std::string listed(const std::set<RelayRef>& relays) {
  std::string out;
  for (const auto& relay : relays) out += (out.empty() ? "" : ", ") + text(relay);
  return out;
}

const description::Relays& relaysOf(const device::Device& device) { return *device.described().profile->relays; }

std::unexpected<Error> readsBackClosed(const RelayRef& relay) {
  return fail(ErrorCode::device_error, "relay " + text(relay) + " was told to open and reads back closed",
              "device " + relay.device, "the contact may be welded: take the shunt resistor off by hand before going on");
}

bool canRead(const device::Device& device) { return relaysOf(device).state.has_value(); }

}  // namespace

std::optional<Instant> RelayGuard::lastClosed() const {
  return maybeClosed_.empty() ? lastOpened_ : clock_.now();
}

RelayGuard::RelayGuard(Devices devices, RelayJournal& journal, Clock& clock)
    : devices_(std::move(devices)), journal_(journal), clock_(clock), maybeClosed_(journal.unresolved()) {}

Result<device::Device*> RelayGuard::deviceOf(const RelayRef& relay) const {
  const auto found = devices_.find(relay.device);
  if (found == devices_.end() || !found->second->described().profile->relays) {
    return fail(ErrorCode::not_found, "no device of the rack has relay " + text(relay), {},
                "put its device back into the rack and run `shuntwright release`, or see to it that the relay is open "
                "and delete the rack's relay journal");
  }
  return found->second;
}

Result<void> RelayGuard::noteOpen(const RelayRef& relay) {
  maybeClosed_.erase(relay);
  lastOpened_ = clock_.now();
  if (onSwitching) onSwitching(relay, false);
  return journal_.opened(relay, clock_.now());
}

Task<Result<void>> RelayGuard::close(const LoadPathPermit&, RelayRef relay) {
  auto device = deviceOf(relay);
  if (!device) co_return std::unexpected(device.error());
  if (auto noted = journal_.closing(relay, clock_.now()); !noted) co_return noted;
  maybeClosed_.insert(relay);
  if (onSwitching) onSwitching(relay, true);
  if (auto done = co_await (*device)->closeRelay(relay.relay); !done) co_return done;
  if (canRead(**device)) {
    // The contact may still bounce while it operates.
    co_await waitFor(clock_, relaysOf(**device).operateTime);
    auto closed = co_await (*device)->relayClosed(relay.relay);
    if (!closed) co_return std::unexpected(closed.error());
    if (!*closed) {
      co_return fail(ErrorCode::device_error, "relay " + text(relay) + " was told to close and reads back open",
                     "device " + relay.device, "check the relay board's supply and the relay itself");
    }
  }
  co_return Result<void>{};
}

Task<Result<void>> RelayGuard::open(RelayRef relay) {
  auto device = deviceOf(relay);
  if (!device) co_return std::unexpected(device.error());
  if (auto done = co_await (*device)->openRelay(relay.relay); !done) co_return done;
  if (canRead(**device)) {
    co_await waitFor(clock_, relaysOf(**device).releaseTime);
    auto closed = co_await (*device)->relayClosed(relay.relay);
    if (!closed) co_return std::unexpected(closed.error());
    if (*closed) {
      co_return readsBackClosed(relay);
    }
  }
  co_return noteOpen(relay);
}

Task<Result<void>> RelayGuard::openDevice(std::string name, std::vector<int> relays) {
  auto found = deviceOf(RelayRef{name, relays.front()});
  if (!found) {
    co_return std::unexpected(std::move(found.error()).wrap("a relay that an earlier run may have left closed is unknown"));
  }
  device::Device& device = **found;
  Result<void> result;
  std::set<int> refused;
  if (auto all = co_await device.openAllRelays(); !all) {
    const ErrorCode code = all.error().code;
    if (code != ErrorCode::device_error && code != ErrorCode::bad_answer) co_return all;
    // It does not take the order for all of them: relay by relay.
    for (const int number : relays) {
      auto one = co_await device.openRelay(number);
      if (one) continue;
      result = std::move(one);
      refused.insert(number);
    }
  }
  if (canRead(device)) co_await waitFor(clock_, relaysOf(device).releaseTime);
  for (const int number : relays) {
    if (refused.contains(number)) continue;
    const RelayRef relay{name, number};
    if (canRead(device)) {
      auto closed = co_await device.relayClosed(number);
      if (!closed) co_return std::unexpected(closed.error());
      if (*closed) {
        // One that stays closed does not keep the others in the book.
        result = readsBackClosed(relay);
        continue;
      }
    }
    if (auto noted = noteOpen(relay); !noted) result = noted;
  }
  co_return result;
}

Task<void> RelayGuard::openInto(std::string name, std::vector<int> relays, Result<void>& into) {
  into = co_await openDevice(std::move(name), std::move(relays));
}

Task<Result<void>> RelayGuard::openAll(Nanoseconds limit) {
  const Instant deadline = clock_.now() + limit;
  while (!maybeClosed_.empty()) {
    std::map<std::string, std::vector<int>> byDevice;
    for (const auto& relay : maybeClosed_) byDevice[relay.device].push_back(relay.relay);
    // All devices at once: one that is silent must not keep another's relays closed for its time-outs.
    std::map<std::string, Result<void>> results;
    std::vector<std::function<Task<void>()>> bodies;
    for (auto& [name, relays] : byDevice) {
      auto& into = results[name];
      bodies.push_back([this, &name, &relays, &into]() -> Task<void> { return openInto(name, relays, into); });
    }
    co_await whenAll(std::move(bodies));
    if (maybeClosed_.empty()) break;
    if (clock_.now() >= deadline) {
      Error error(ErrorCode::device_error, "relays may still be closed: " + listed(maybeClosed_), {},
                  "run `shuntwright release` again; until then take no reading for true and do not re-engage a "
                  "controller");
      for (auto& [name, result] : results) {
        if (result) continue;
        // No further try helps a relay that the rack does not know any more.
        if (result.error().code == ErrorCode::not_found) error.remedy = result.error().remedy;
        error.cause = std::make_shared<const Error>(std::move(result.error()));
        break;
      }
      co_return std::unexpected(std::move(error));
    }
    co_await waitFor(clock_, std::chrono::milliseconds(200));
  }
  co_return Result<void>{};
}

Task<Result<void>> RelayGuard::openEvery(Nanoseconds limit) {
  for (const auto& [name, device] : devices_) {
    if (!device->described().profile->relays) continue;
    const auto& relays = relaysOf(*device);
    for (int k = 0; k < relays.count; ++k) maybeClosed_.insert(RelayRef{name, relays.first + k});
  }
  co_return co_await openAll(limit);
}

Task<Result<void>> withRelays(RelayGuard& guard, std::function<Task<Result<void>>()> body) {
  Result<void> result;
  std::exception_ptr thrown;
  try {
    result = co_await body();
  } catch (...) {
    thrown = std::current_exception();
  }
  co_await asio::this_coro::reset_cancellation_state(asio::disable_cancellation());
  Result<void> opened;
  try {
    opened = co_await guard.openAll();
  } catch (const std::exception& e) {
    opened = fail(ErrorCode::io, std::string("opening the relays failed: ") + e.what());
  }
  co_await asio::this_coro::reset_cancellation_state(asio::enable_terminal_cancellation());
  // An interrupted body has no result to give; which relays are left, the guard and its journal know.
  if (thrown) std::rethrow_exception(thrown);
  if (!opened) {
    if (!result) {
      Error both = std::move(opened.error());
      both.message += "; it began with: " + result.error().message;
      co_return std::unexpected(std::move(both));
    }
    co_return opened;
  }
  co_return result;
}

}  // namespace shuntwright::rack
