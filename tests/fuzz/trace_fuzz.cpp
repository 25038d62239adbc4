// Any bytes at all, taken for a wire trace: an error or a trace, and what was read is written and read back
// the same.
#include <cstddef>
#include <cstdint>
#include <cstdlib>
#include <string>

#include "driver/transport/trace.h"

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
  using namespace shuntwright;
  using namespace shuntwright::transport;
  const auto trace = parseTrace(std::string_view(reinterpret_cast<const char*>(data), size), "fuzzed.trace");
  if (!trace) return 0;
  std::string text =
      "shuntwright trace 1\nstart " + std::to_string(trace->start.time_since_epoch().count()) + "\n";
  for (const auto& event : trace->events)
    text += traceLine(event.kind, event.offset, event.device, event.bytes);
  const auto again = parseTrace(text, "written.trace");
  if (!again || again->events.size() != trace->events.size()) std::abort();
  for (std::size_t k = 0; k < trace->events.size(); ++k) {
    const auto &a = trace->events[k], &b = again->events[k];
    if (a.kind != b.kind || a.offset != b.offset || a.device != b.device || a.bytes != b.bytes) std::abort();
  }
  return 0;
}
