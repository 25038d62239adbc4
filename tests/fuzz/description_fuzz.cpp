// Any bytes at all, taken for a profile, for a rack, and for a rack that uses a good profile, must give
// problems or a description, never a crash.
#include <cstddef>
#include <cstdint>
#include <string>
#include <string_view>

#include "driver/description/load.h"

namespace {

constexpr std::string_view kProfile = R"([profile]
name = "p"
[reach.tcp]
port = 5025
[inputs]
count = 16
gives = "mV/V"
full_scale = "4 mV/V"
excitations = ["5 V"]
rates = ["100 Hz"]
completions = [{ value = "120 ohm", tolerance = "0.1 %" }]
[inputs.read]
ask = "R"
answer = "{values:,}"
[relays]
count = 16
close = "C{relay}"
open = "O{relay}"
)";

}  // namespace

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
  using namespace shuntwright::description;
  const std::string text(reinterpret_cast<const char*>(data), size);
  Diagnostics ofProfile;
  parseProfile(text, "fuzzed.toml", ofProfile);
  ofProfile.render(true);

  Diagnostics ofRack;
  const FileReader read = [&](const std::string& path) -> std::optional<std::string> {
    if (path == "rack.toml") return text;
    if (path == "self.toml") return text;
    if (path == "good.toml") return std::string(kProfile);
    return {};
  };
  loadRack("rack.toml", read, ofRack);
  ofRack.render(false);
  kindOfFile(text);
  return 0;
}
