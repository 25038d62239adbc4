#pragma once

#include <functional>
#include <optional>
#include <string>
#include <string_view>

#include "driver/description/diagnostics.h"
#include "driver/description/profile.h"
#include "driver/description/rack.h"

namespace shuntwright::description {

/// Gives the text of a file, or nothing when it cannot be read. Passed in, so that tests need no disk.
using FileReader = std::function<std::optional<std::string>(const std::string& path)>;
FileReader diskReader();

/// Parses one profile. A syntax error is reported alone; mistakes of meaning all at once. Returns a
/// profile only when `diagnostics` has no error.
std::optional<Profile> parseProfile(std::string_view text, const std::string& file, Diagnostics& diagnostics);

/// Parses a rack and the profiles it names (paths relative to the rack's folder), and checks every
/// reference, number range and wiring rule that needs no physics.
std::optional<Rack> loadRack(const std::string& file, const FileReader& read, Diagnostics& diagnostics);
std::optional<Profile> loadProfile(const std::string& file, const FileReader& read, Diagnostics& diagnostics);

/// What a file describes, by its top-level tables: "profile", "rack" or "".
std::string_view kindOfFile(std::string_view text);

}  // namespace shuntwright::description
