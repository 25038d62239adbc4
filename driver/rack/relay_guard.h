#pragma once

#include <functional>
#include <map>
#include <optional>
#include <set>
#include <string>
#include <vector>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/core/task.h"
#include "driver/device/device.h"
#include "driver/rack/load_path.h"
#include "driver/rack/relay_journal.h"

namespace shuntwright::rack {

/// The only way to a relay. It journals before it closes, knows what may be closed, and opens it again.
class RelayGuard {
 public:
  using Devices = std::map<std::string, device::Device*>;

  RelayGuard(Devices devices, RelayJournal& journal, Clock& clock);

  /// Closes one relay and, where the device can tell, reads it back. Errors: the journal's (nothing was sent
  /// then), the device's, or device_error when the read-back says it is open. The relay counts as possibly
  /// closed from the moment before the command goes out.
  Task<Result<void>> close(const LoadPathPermit& permit, description::RelayRef relay);

  /// Opens one relay, with read-back. Needs no permit: an open relay is the safe state.
  Task<Result<void>> open(description::RelayRef relay);

  /// Opens every relay that may be closed (those of an earlier run's journal included), all devices at once,
  /// relay by relay where a device refuses the order for all, trying again until the device confirms or `limit`
  /// is over. The error names the relays that may still be closed.
  Task<Result<void>> openAll(Nanoseconds limit = std::chrono::seconds(10));

  /// Opens every relay of every device, whatever the journal says.
  Task<Result<void>> openEvery(Nanoseconds limit = std::chrono::seconds(10));

  const std::set<description::RelayRef>& maybeClosed() const { return maybeClosed_; }

  /// The last moment at which a relay may have been closed: now while one may be; nothing before the first.
  std::optional<Instant> lastClosed() const;

  /// Told whenever a relay starts to move: true before a close command, false once it is open again.
  std::function<void(const description::RelayRef&, bool)> onSwitching;

 private:
  Task<Result<void>> openDevice(std::string name, std::vector<int> relays);
  Task<void> openInto(std::string name, std::vector<int> relays, Result<void>& into);
  Result<device::Device*> deviceOf(const description::RelayRef& relay) const;
  Result<void> noteOpen(const description::RelayRef& relay);

  Devices devices_;
  RelayJournal& journal_;
  Clock& clock_;
  std::set<description::RelayRef> maybeClosed_;
  std::optional<Instant> lastOpened_;
};

/// Awaits `body`, then opens every relay, whatever ended the body: return, error, exception or cancellation.
/// The opening itself cannot be cancelled. A body's error comes first; relays that do not open are added to it. What
/// the body threw is thrown on; maybeClosed() then tells of relays that did not open.
Task<Result<void>> withRelays(RelayGuard& guard, std::function<Task<Result<void>>()> body);

}  // namespace shuntwright::rack
