#pragma once

#include <cstdint>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "driver/core/error.h"
#include "driver/device/sample_block.h"
#include "driver/recording/event_line.h"
#include "driver/recording/file_layout.h"
#include "driver/recording/plan.h"

namespace shuntwright::recording {

/// Writes one recording: raw ratio, corrected values, flags and time of every channel, and events.
///
/// Rows are staged and written with plain writes; every `commitEvery` they are synced to the disk and only
/// then counted, so that a file cut off at any moment opens and says how many rows are whole. A full file
/// rolls over to the next part (name-0002.h5). After the first append nothing is allocated but for events
/// and new parts. One thread; no clock: the caller passes the time.
class Recorder {
 public:
  /// Errors: refused when the file exists; io, also when the disk has no room for one file.
  static Result<std::unique_ptr<Recorder>> create(const std::string& path, RecordingPlan plan);
  ~Recorder();  ///< leaves the file as an interrupted one: finish() ends it properly

  /// Samples of the plan's device `index`, and their corrected values (frames x block.inputs). Frames lost
  /// before the block become an event (one a second at most) and are added to the device's count. Errors: io (disk full, ...);
  /// what was committed before stays whole.
  Result<void> append(std::size_t index, const device::SampleBlock& block, std::span<const float> corrected,
                      Instant now);

  /// Notes something; text that is no UTF-8 is mended. A quarter of the room is kept for marks and steps. kind ("mark", "step begin", "step end", "lost", "fault", ...), and what. `device` and
  /// `count` may be left out. Errors: io; refused when the file's room for events is used up.
  Result<void> event(std::string_view kind, Instant when, std::string_view text, std::string_view device = {},
                     std::uint64_t count = 0);

  /// Writes and syncs what is staged. append() does so by itself when it is due.
  Result<void> commit(Instant now);
  /// The same when `commitEvery` has passed: for times when no samples come but marks and faults may.
  Result<void> commitIfDue(Instant now);

  /// Commits and marks the file complete; its size stays what it was.
  Result<void> finish(Instant now);

  std::uint64_t rows(std::size_t index) const;   ///< recorded so far, all parts
  std::uint64_t lost(std::size_t index) const;
  const std::vector<std::string>& paths() const { return paths_; }  ///< of every part, in order
  const std::string& path() const { return path_; }  ///< of the current part

 private:
  struct Gap;
  struct Staged;
  /// How much of the events' store a line may fill.
  enum class Room { reports, marks, end };
  Recorder(std::string path, RecordingPlan plan);
  Result<void> openPart();
  Result<void> endPart(Instant now);
  Result<void> rollOver(Instant now, Instant next);
  Result<void> writeEvent(const std::string& line, Room room);
  Result<void> noteGap(std::size_t index, Gap& gap, Instant now, Room room);
  Result<void> noteGaps(std::size_t index, Instant now, Room room);
  Result<void> flush(std::size_t index);
  Result<void> writeAt(std::uint64_t offset, const void* data, std::size_t size);
  Result<void> writeRows(const RowPlaces& places, std::uint64_t row, const std::byte* data, std::uint64_t count);
  Result<void> sync();

  std::string basePath_, path_;
  RecordingPlan plan_;
  int part_ = 0;
  int descriptor_ = -1;
  FileLayout layout_;
  std::vector<std::unique_ptr<Staged>> devices_;
  std::uint64_t eventsUsed_ = 0;
  std::vector<std::string> paths_;
  std::optional<std::string> openStep_;  ///< label of the hold under way
  Instant lastCommit_;
};

/// "run.h5" -> "run-0002.h5"; part 1 is the name itself.
std::string partPath(const std::string& path, int part);

}  // namespace shuntwright::recording
