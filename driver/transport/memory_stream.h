#pragma once

#include <memory>
#include <string>
#include <utility>

#include "driver/core/clock.h"
#include "driver/transport/stream.h"

namespace shuntwright::transport {

using StreamPair = std::pair<std::unique_ptr<Stream>, std::unique_ptr<Stream>>;

/// Two ends of a stream within the program: what one end writes the other reads, at once and in order.
/// Closing one end lets the other read what is left and then fail. The clock is for deadlines only and must
/// outlive the pair.
StreamPair memoryPair(Clock& clock, std::string name);

}  // namespace shuntwright::transport
