#pragma once

#include <map>
#include <stdexcept>
#include <string>
#include <vector>

#include "driver/description/load.h"

// A small good profile and rack, and a way to spoil one thing in them.
namespace sample {

inline const std::string kProfile = R"([profile]
name = "sample"
title = "Sample device"

[reach.serial]
baud = 9600
[reach.tcp]
port = 5025

[text]
request_end = "\r\n"
answer_end = "\n"
checksum = { kind = "xor8", separator = "*" }
timeout = "250 ms"
retries = 3
gap = "2 ms"

[identify]
ask = "ID?"
answer = "ID {model},{serial},{version}"
model = "SAMPLE"

[[error]]
pattern = "ERR {code} {text}"

[inputs]
count = 4
gives = "uV/V"
saturated = ["OVR"]
full_scale = "4 mV/V"
completions = [{ value = "120 ohm", tolerance = "0.1 %" }, { value = "350 ohm", tolerance = "0.1 %" }]
half_bridge = { value = "1 kohm", tolerance = "0.02 %" }
excitations = ["2.5 V", "5 V"]
rates = ["10 Hz", "100 Hz"]
filter_time_constant = "5 ms"

[inputs.stream]
start = "GO"
stop = { ask = "HALT", answer = "OK" }
line = "@{counter:04X} {values:,}"
counter_bits = 16

[inputs.set_rate]
ask = "RATE {rate}"
answer = "OK"

[relays]
count = 8
first = 1
operate_time = "8 ms"
contact_resistance = "100 mohm"
contact_tolerance = "50 mohm"
open_all = "OPEN ALL"

[relays.close]
ask = "CLOSE {relay:02}"
answer = "OK"
[relays.open]
ask = "OPEN {relay:02}"
answer = "OK"
[relays.state]
ask = "STATE {relay}"
answer = "{state}"
closed = "C"
open = "O"
)";

inline const std::string kRack = R"([rack]
name = "bench"
title = "Sample bench"

[[device]]
name = "amp1"
profile = "../p/device.toml"
port = "tcp:127.0.0.1:47001"
rate = "100 Hz"

[gauge.G350]
factor = 2.1
resistance = "350 ohm"

[resistor.RC]
value = "174.65 kohm"
tolerance = "0.1 %"

[[channel]]
name = "S01"
device = "amp1"
input = 1
circuit = "quarter 3-wire"
gauge = "G350"
leads = { length = "20 m", awg = 26 }
excitation = "5 V"
shunts = [{ name = "cal", resistor = "RC", relay = "amp1/1", across = "completion" }]

[[channel]]
name = "F1"
device = "amp1"
input = 2
circuit = "transducer"
transducer = { sensitivity = "2 mV/V", rated_value = 50, unit = "kN" }
leads = { each = "0.5 ohm" }
)";

inline std::string spoilt(std::string text, const std::string& from, const std::string& to) {
  const auto at = text.find(from);
  if (at == std::string::npos) throw std::logic_error("the sample has no " + from);
  return text.replace(at, from.size(), to);
}

inline shuntwright::description::FileReader reader(std::map<std::string, std::string> files) {
  return [files = std::move(files)](const std::string& path) -> std::optional<std::string> {
    const auto found = files.find(path);
    return found == files.end() ? std::nullopt : std::optional(found->second);
  };
}

/// "line:column: message | remedy" for each problem; the file's name stands before it when it is no rack.
inline std::vector<std::string> lines(const shuntwright::description::Diagnostics& diagnostics) {
  std::vector<std::string> out;
  for (const auto& p : diagnostics.problems()) {
    std::string line = p.place.file == "b/rack.toml" ? "" : p.place.file + ":";
    line += std::to_string(p.place.line) + ":" + std::to_string(p.place.column) + ": " + p.message;
    if (!p.remedy.empty()) line += " | " + p.remedy;
    out.push_back(line);
  }
  return out;
}

inline std::vector<std::string> rackProblems(const std::string& rack, const std::string& profile = kProfile) {
  shuntwright::description::Diagnostics diagnostics;
  const auto loaded = shuntwright::description::loadRack(
      "b/rack.toml", reader({{"b/rack.toml", rack}, {"p/device.toml", profile}}), diagnostics);
  if (loaded.has_value() != diagnostics.ok()) throw std::logic_error("a rack and errors at once");
  return lines(diagnostics);
}

inline std::vector<std::string> profileProblems(const std::string& text) {
  shuntwright::description::Diagnostics diagnostics;
  const auto loaded = shuntwright::description::parseProfile(text, "b/rack.toml", diagnostics);
  if (loaded.has_value() != diagnostics.ok()) throw std::logic_error("a profile and errors at once");
  return lines(diagnostics);
}

}  // namespace sample
