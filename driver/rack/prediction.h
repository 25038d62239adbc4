#pragma once

#include <string>
#include <vector>

#include "driver/bridge/shunt_step.h"
#include "driver/description/diagnostics.h"
#include "driver/description/rack.h"

namespace shuntwright::rack {

struct ShuntPrediction {
  std::string name;
  bridge::ShuntStep step;  ///< with the leads as the rack states them
};

struct ChannelPrediction {
  std::string name;
  std::string circuit;
  bool transducer = false;
  std::string unit = "microstrain";  ///< of what a shunt simulates
  double unitsPerStrain = 1e6;  ///< simulated value = step.simulated x this (a transducer: its rated value)
  std::vector<ShuntPrediction> shunts;
};

/// What each shunt of each channel is predicted to do, from the circuits as wired. Adds what no reader of files
/// can see: a shunt that does nothing, and a lead loss that is to go into the span although the step of the
/// shunt does not carry it, and excitation that heats a gauge too much.
std::vector<ChannelPrediction> predict(const description::Rack& rack, description::Diagnostics& diagnostics);

}  // namespace shuntwright::rack
