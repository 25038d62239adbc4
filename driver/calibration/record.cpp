#include "driver/calibration/record.h"

#include <algorithm>
#include <cmath>

namespace shuntwright::calibration {

const char* name(Verdict verdict) {
  switch (verdict) {
    case Verdict::pass: return "pass";
    case Verdict::fail: return "fail";
    case Verdict::not_calibrated: return "not calibrated";
  }
  return "fail";
}

bool ShuntResult::measured() const { return std::isfinite(measuredStep.in(units::volt_per_volt)); }

bool Record::passed() const {
  return relaysMaybeClosed.empty() && std::none_of(channels.begin(), channels.end(), [](const ChannelResult& c) {
           return c.verdict == Verdict::fail;
         });
}

const ChannelResult* Record::channel(const std::string& channelName) const {
  const auto found = std::find_if(channels.begin(), channels.end(),
                                  [&](const ChannelResult& c) { return c.name == channelName; });
  return found == channels.end() ? nullptr : &*found;
}

}  // namespace shuntwright::calibration
