#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "driver/core/error.h"
#include "driver/description/rack.h"

namespace shuntwright::dev {

/// A campaign in which one input of the budget outweighs all others.
struct Dominance {
  std::string input, channel, quantity;
  int racks = 0;
  double stated_percent = 0;  ///< truth inside, the input stated as it is
  double halved_percent = 0;  ///< the same racks, the input stated half as large: has to fail
};

/// One campaign for each input of the budget, on channels of the shipped rack of every circuit.
/// Errors: as coverageOf().
Result<std::vector<Dominance>> dominanceOf(const description::Rack& everyCircuit, int racks, std::uint64_t seed);

}  // namespace shuntwright::dev
