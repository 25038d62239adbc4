#pragma once

#include <array>
#include <cstdint>
#include <string>
#include <vector>

#include "driver/core/error.h"
#include "driver/recording/plan.h"

namespace shuntwright::recording {

/// Attributes of a device that hold what bends the maps of its channels.
inline constexpr std::array<const char*, 4> kBendNames{"b2", "b3", "b4", "b5"};

/// Where a dataset's rows lie in the file: chunks of equal size, in order.
struct RowPlaces {
  std::uint64_t rowBytes = 0;
  std::uint64_t rowsPerChunk = 0;
  std::vector<std::uint64_t> chunks;  ///< file offset of each
};

struct DevicePlaces {
  std::uint64_t capacity = 0;    ///< rows
  RowPlaces time, ratio, corrected, flags;
  std::uint64_t rowsAt = 0;      ///< file offset of the row counter
  std::uint64_t lostAt = 0;      ///< of the count of lost frames
};

/// All that is written while recording, by file offset.
struct FileLayout {
  std::vector<DevicePlaces> devices;
  std::uint64_t eventsAt = 0;
  std::uint64_t eventBytes = 0;
  std::uint64_t eventsUsedAt = 0;
  std::uint64_t endedAt = 0;     ///< 8 bytes: "open" or "complete"
};

/// Creates the file full-size through HDF5 (old format, early allocation, nothing filled), notes where
/// everything lies and closes it again; from then on only plain writes touch it. FORMAT.md has the layout.
/// Errors: io; refused when the file exists.
Result<FileLayout> createFile(const std::string& path, const RecordingPlan& plan, int part);

}  // namespace shuntwright::recording
