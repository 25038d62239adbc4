#pragma once

#include <string>
#include <string_view>

#include "driver/description/diagnostics.h"
#include "driver/description/rack.h"
#include "sim/fault/scenario.h"

namespace shuntwright::sim {

/// Reads a scenario (TOML) for a rack; every mistake is located. Keys, all optional:
///
///     [imperfections]  gauges completions leads resistors gauge_factors contacts = number (times the stated
///                      tolerance), leads_warm = bool, span_tolerance = "0.5 %", offset drift noise mains = "1 uV/V",
///                      answer_delay = "1 ms"
///     [beam]           span = "12 m", modulus = "210 GPa", second_moment_m4 = 9.2e-4, poisson = 0.3,
///                      web_area = "7200 mm2"
///     [load]           largest = "180 kN", levels = [0.5, 1.0, 0.0], ramp = "4 s", hold = "6 s"
///     [[gauge]]        channel, along = "3 m", fibre = "250 mm", angle = 45, on = "flange" | "web"    (a place on the beam)
///     [[fault]]        what = "relay dead" | "relay welded" (relay = "relays1/3"),
///                      "relays swapped" (relay, with = "relays1/4"),
///                      "wrong shunt" (channel, scale = 1.1), "noisy" (channel, scale = 20), "open lead" |
///                      "saturated" (channel), "no zero return" (channel, strain = "30 microstrain"),
///                      "mute" | "garbage" | "half answer" | "error answer" (device, request = "read", from = 1,
///                      count = 3), "late" (the same, and delay = "2 s"), "lost frames" (device, part = 0.01),
///                      "silent" (device, after = "5 s"), "unplugged" (device, after = "5 s", lasting = "2 s")
///
/// A second file may be laid over a first: what it says counts, what it adds is added.
Scenario parseScenario(std::string_view text, const std::string& file, const description::Rack& rack,
                       description::Diagnostics& diagnostics, Scenario base = {});

}  // namespace shuntwright::sim
