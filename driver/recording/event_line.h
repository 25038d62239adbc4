#pragma once

#include <cstdint>
#include <string>
#include <string_view>

#include "driver/core/clock.h"

namespace shuntwright::recording {

inline constexpr const char* kStepBegin = "step begin";
inline constexpr const char* kStepEnd = "step end";

/// Somebody's own note, which finds room even when a failing device has filled its share of the store.
bool isOperators(std::string_view kind);

/// One event as a line of JSON with its line feed. Bytes that are no UTF-8 become U+FFFD, so that the line
/// stays JSON.
/// @param continued  the step goes on from the part before
std::string eventLine(std::string_view kind, Instant when, std::string_view text, std::string_view device,
                      std::uint64_t count, bool continued);

/// The text with every byte that is no part of a UTF-8 character (RFC 3629) replaced by U+FFFD.
std::string validUtf8(std::string_view text);

}  // namespace shuntwright::recording
