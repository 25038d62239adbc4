#pragma once

#include <map>
#include <memory>
#include <string>
#include <vector>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/core/task.h"
#include "driver/device/device.h"
#include "driver/rack/load_path.h"
#include "driver/rack/port_lock.h"
#include "driver/rack/relay_guard.h"
#include "driver/rack/relay_journal.h"
#include "driver/transport/stream.h"

namespace shuntwright::rack {

struct LiveRackOptions {
  LiveRackOptions() {}
  std::string lockFolder;                ///< of port locks; empty: none are taken (simulated, replayed)
  std::vector<std::string> onlyDevices;  ///< empty: all of the rack
};

/// A described rack brought to life: every device open and identified, every port locked, one relay guard.
///
/// One thread. The rack, clock and journal must outlive it. Devices are opened at the same time; the first
/// error closes all again.
class LiveRack {
 public:
  static Task<Result<std::unique_ptr<LiveRack>>> open(const description::Rack& rack, transport::Opener opener,
                                                      Clock& clock, RelayJournal& journal,
                                                      LiveRackOptions options = {});
  ~LiveRack();

  const description::Rack& described() const { return rack_; }
  Clock& clock() const { return clock_; }
  RelayGuard& relays() { return *guard_; }
  device::Device& device(const std::string& name) { return *devices_.at(name); }
  const device::Identity& identity(const std::string& name) const { return identities_.at(name); }

  /// Opens every relay, then sets each amplifier's excitation and rate as the rack says. Errors: the
  /// devices'; bad_use when channels of one amplifier ask for different excitations it can only set as one.
  Task<Result<void>> prepare(LoadPathPermit permit);

  /// The rate a device samples at: the rack's, or the profile's first.
  static units::Frequency rateOf(const description::Device& device);

  void close();  ///< drops the connections; does not touch relays

 private:
  LiveRack(const description::Rack& rack, Clock& clock) : rack_(rack), clock_(clock) {}

  const description::Rack& rack_;
  Clock& clock_;
  std::vector<PortLock> locks_;
  std::map<std::string, std::unique_ptr<device::Device>> devices_;
  std::map<std::string, device::Identity> identities_;
  std::unique_ptr<RelayGuard> guard_;
};

}  // namespace shuntwright::rack
