#include "driver/description/rack.h"

#include <algorithm>

namespace shuntwright::description {

const Device* Rack::device(const std::string& wanted) const {
  const auto found = std::ranges::find(devices, wanted, &Device::name);
  return found == devices.end() ? nullptr : &*found;
}

const Channel* Rack::channel(const std::string& wanted) const {
  const auto found = std::ranges::find(channels, wanted, &Channel::name);
  return found == channels.end() ? nullptr : &*found;
}

const GaugeSheet& Rack::gaugeOf(const Channel& which) const {
  return gauges.at(which.gauge);
}

GaugeOfArm Rack::gaugeOf(const Channel& channel, std::size_t arm) const {
  const GaugeSheet& sheet = gaugeOf(channel);
  GaugeOfArm out{sheet.factor, sheet.factorTolerance, sheet.resistance};
  if (channel.measuredResistance) {
    out.resistance.value = channel.measuredResistance->value;
    if (arm == 0) {
      out.resistance = *channel.measuredResistance;
      out.measured = true;
    }
  }
  if (const auto& own = channel.arms[arm]) {
    if (own->resistance) {
      out.resistance = *own->resistance;
      out.measured = true;
    }
    out.factor = own->factor.value_or(out.factor);
    out.factorTolerance = own->factorTolerance.value_or(out.factorTolerance);
  }
  return out;
}

const Resistor& Rack::resistorOf(const Shunt& shunt) const {
  return resistors.at(shunt.resistor);
}

}  // namespace shuntwright::description
