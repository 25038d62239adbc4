#pragma once

#include <string>
#include <vector>

#include "driver/core/error.h"
#include "driver/description/rack.h"

namespace shuntwright::rack {

/// Proof that somebody said the load path is isolated. Whatever writes something that can change a reading
/// (relay, rate, excitation) asks for one, so no path to a device goes round the question. A shunt on a
/// channel that closes a load-control loop is read as load and moves the actuator; relays may be wired to
/// another channel than the rack says, so the question is asked of the whole rack.
class LoadPathPermit {
 public:
  const std::string& by() const { return by_; }

 private:
  friend Result<LoadPathPermit> confirmLoadPath(const description::Rack& rack, bool isolated, std::string by);
  explicit LoadPathPermit(std::string by) : by_(std::move(by)) {}
  std::string by_;
};

/// @param isolated what the person (or `--isolated`) said.
/// @param by       where that was said: "--isolated", "terminal", "plug-in host".
/// Errors: refused without the confirmation; the message names the channels marked load control.
Result<LoadPathPermit> confirmLoadPath(const description::Rack& rack, bool isolated, std::string by);

/// Names of the channels marked load_control.
std::vector<std::string> loadControlChannels(const description::Rack& rack);

/// The question, as a terminal asks it.
std::string loadPathQuestion(const description::Rack& rack);

}  // namespace shuntwright::rack
