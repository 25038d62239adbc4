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

const Resistor& Rack::resistorOf(const Shunt& shunt) const {
  return resistors.at(shunt.resistor);
}

}  // namespace shuntwright::description
