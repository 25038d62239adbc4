#pragma once

#include <string>
#include <string_view>

#include "driver/description/diagnostics.h"
#include "driver/description/rack.h"
#include "sim/fault/scenario.h"

namespace shuntwright::sim {

/// Reads a scenario (TOML) for a rack; every mistake is located. The keys are listed in profiles/README.md.
/// @param base  what the file is laid over: what it says counts, what it adds is added. Given back as it is after a
///              syntax error
Scenario parseScenario(std::string_view text, const std::string& file, const description::Rack& rack,
                       description::Diagnostics& diagnostics, Scenario base = {});

}  // namespace shuntwright::sim
