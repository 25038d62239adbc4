#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "driver/core/error.h"
#include "driver/recording/file_layout.h"
#include "driver/recording/plan.h"

namespace shuntwright::recording {

/// Whether the disk of `path` has room for one part. Errors: io, with how much is needed and how much is
/// free. A file system that does not tell counts as one that has room.
Result<void> checkRoom(const std::string& path, const RecordingPlan& plan);

/// Reserves the file's whole size on the disk, so that it cannot fill up in mid-test. Errors: io when it has
/// not that much; a file system that cannot reserve is left as it is.
Result<void> reserveRoom(int descriptor, const std::string& path);

/// Gives back what lies behind the rows and events that were written: holes, so that size and layout stay as
/// they are and a cut at any moment leaves the file readable. Where that cannot be done nothing happens.
/// @param rows  written, of each device
void giveBackRoom(int descriptor, const FileLayout& layout, const std::vector<std::uint64_t>& rows,
                  std::uint64_t eventBytes);

/// Makes the file's name itself survive a power cut.
void syncFolder(const std::string& path);

}  // namespace shuntwright::recording
