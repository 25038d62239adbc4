#include "driver/recording/recorder.h"

#include <fcntl.h>
#include <unistd.h>

#include <algorithm>
#include <cerrno>
#include <cstdio>
#include <cstring>

#include "driver/recording/file_room.h"

namespace shuntwright::recording {

namespace {

constexpr std::size_t kStagedRows = 1024;
constexpr int kMostParts = 9999;
constexpr Nanoseconds kGapsTogether = std::chrono::seconds(1);

Error systemError(const char* what, const std::string& path) {
  const int number = errno;
  return Error(ErrorCode::io, std::string(what) + ": " + std::strerror(number), path,
               number == ENOSPC || number == EFBIG
                   ? "free some space and start a new recording; everything committed before is whole"
                   : "check the disk; everything committed before is whole");
}

}  // namespace

std::string partPath(const std::string& path, int part) {
  if (part == 1) return path;
  char number[16];
  std::snprintf(number, sizeof number, "-%04d", part);
  const auto dot = path.rfind('.');
  const auto slash = path.rfind('/');
  const bool hasEnding = dot != std::string::npos && (slash == std::string::npos || dot > slash);
  return hasEnding ? path.substr(0, dot) + number + path.substr(dot) : path + number;
}

/// Frames or lines that are missing and no event tells yet.
struct Recorder::Gap {
  const char* kind;
  const char* text;
  std::uint64_t count = 0;
  Instant since{};                        ///< the first of them
  Instant quietUntil = Instant::min();

  void add(std::uint64_t more, Instant when) {
    if (count == 0) since = when;
    count += more;
  }
};

/// Rows of one device that wait to be written.
struct Recorder::Staged {
  Gap lostGap{"lost", "samples lost before this moment"};
  Gap damagedGap{"damaged", "lines that could not be read before this moment"};
  std::size_t staged = 0;
  std::uint64_t written = 0;    ///< rows of this part in the file, synced or not
  std::uint64_t before = 0;     ///< rows of earlier parts
  std::uint64_t lost = 0;       ///< frames, this part
  std::uint64_t lostBefore = 0; ///< frames, earlier parts
  std::vector<std::int64_t> time;
  std::vector<float> ratio, corrected;
  std::vector<std::uint8_t> flags;
};

Recorder::Recorder(std::string path, RecordingPlan plan)
    : basePath_(std::move(path)), plan_(std::move(plan)), lastCommit_(plan_.started) {
  for (const auto& device : plan_.devices) {
    auto staged = std::make_unique<Staged>();
    const std::size_t columns = device.channels.size();
    staged->time.resize(kStagedRows);
    staged->ratio.resize(kStagedRows * columns);
    staged->corrected.resize(kStagedRows * columns);
    staged->flags.resize(kStagedRows * columns);
    devices_.push_back(std::move(staged));
  }
}

Recorder::~Recorder() {
  if (descriptor_ >= 0) ::close(descriptor_);
}

Result<std::unique_ptr<Recorder>> Recorder::create(const std::string& path, RecordingPlan plan) {
  std::unique_ptr<Recorder> recorder(new Recorder(path, std::move(plan)));
  // Found out now and not an hour later, when the first part is full.
  if (const std::string next = partPath(path, 2); ::access(next.c_str(), F_OK) == 0) {
    return fail(ErrorCode::refused, "a further part of an earlier recording is still there", next,
                "move it away with its first part, or choose another name");
  }
  if (::access(path.c_str(), F_OK) != 0) {
    if (auto room = checkRoom(path, recorder->plan_); !room) return std::unexpected(std::move(room.error()));
  }
  if (auto opened = recorder->openPart(); !opened) return std::unexpected(std::move(opened.error()));
  return recorder;
}

Result<void> Recorder::openPart() {
  ++part_;
  path_ = partPath(basePath_, part_);
  auto layout = createFile(path_, plan_, part_);
  // A test under way does not end because somebody put a file in its way.
  while (!layout && layout.error().code == ErrorCode::refused && part_ > 1 && part_ < kMostParts) {
    path_ = partPath(basePath_, ++part_);
    layout = createFile(path_, plan_, part_);
  }
  if (!layout) return std::unexpected(std::move(layout.error()));
  layout_ = std::move(*layout);
  descriptor_ = ::open(path_.c_str(), O_WRONLY | O_CLOEXEC);
  if (descriptor_ < 0) return std::unexpected(systemError("cannot write the recording", path_));
  eventsUsed_ = 0;
  for (auto& device : devices_) {
    device->before += device->written;
    device->lostBefore += device->lost;
    device->written = device->lost = 0;
  }
  const auto reserved = reserveRoom(descriptor_, path_);
  if (!reserved && part_ == 1) {
    (void)::unlink(path_.c_str());  // nothing is in it
    return reserved;
  }
  if (::fsync(descriptor_) != 0) return std::unexpected(systemError("cannot write the recording", path_));
  syncFolder(path_);
  paths_.push_back(path_);
  // A test under way takes what room there is, and says so.
  if (!reserved) (void)event("fault", lastCommit_, reserved.error().message);
  return {};
}

Result<void> Recorder::rollOver(Instant now, Instant next) {
  if (auto ended = endPart(now); !ended) return ended;
  if (auto opened = openPart(); !opened) return opened;
  if (!openStep_) return {};
  auto again = writeEvent(eventLine(kStepBegin, next, *openStep_, {}, 0, true), Room::marks);
  return !again && again.error().code != ErrorCode::refused ? again : Result<void>{};
}

Result<void> Recorder::writeAt(std::uint64_t offset, const void* data, std::size_t size) {
  const char* at = static_cast<const char*>(data);
  while (size > 0) {
    const ssize_t done = ::pwrite(descriptor_, at, size, static_cast<off_t>(offset));
    if (done < 0) {
      if (errno == EINTR) continue;
      return std::unexpected(systemError("cannot write the recording", path_));
    }
    at += done;
    offset += static_cast<std::uint64_t>(done);
    size -= static_cast<std::size_t>(done);
  }
  return {};
}

Result<void> Recorder::writeRows(const RowPlaces& places, std::uint64_t row, const std::byte* data,
                                 std::uint64_t count) {
  while (count > 0) {
    const std::uint64_t chunk = row / places.rowsPerChunk, inside = row % places.rowsPerChunk;
    const std::uint64_t now = std::min(count, places.rowsPerChunk - inside);
    auto done = writeAt(places.chunks[chunk] + inside * places.rowBytes, data, now * places.rowBytes);
    if (!done) return done;
    data += now * places.rowBytes;
    row += now;
    count -= now;
  }
  return {};
}

Result<void> Recorder::flush(std::size_t index) {
  Staged& device = *devices_[index];
  if (device.staged == 0) return {};
  const DevicePlaces& places = layout_.devices[index];
  const auto rowsOf = [](const auto& values) { return reinterpret_cast<const std::byte*>(values.data()); };
  const std::uint64_t at = device.written, count = device.staged;
  if (auto done = writeRows(places.time, at, rowsOf(device.time), count); !done) return done;
  if (auto done = writeRows(places.ratio, at, rowsOf(device.ratio), count); !done) return done;
  if (auto done = writeRows(places.corrected, at, rowsOf(device.corrected), count); !done) return done;
  if (auto done = writeRows(places.flags, at, rowsOf(device.flags), count); !done) return done;
  device.written += count;
  device.staged = 0;
  return {};
}

Result<void> Recorder::sync() {
  if (::fdatasync(descriptor_) != 0) return std::unexpected(systemError("cannot sync the recording", path_));
  return {};
}

Result<void> Recorder::commit(Instant now) {
  for (std::size_t k = 0; k < devices_.size(); ++k) {
    if (auto done = flush(k); !done) return done;
  }
  // Data first, counters after: a counter never speaks of rows that are not there.
  if (auto done = sync(); !done) return done;
  for (std::size_t k = 0; k < devices_.size(); ++k) {
    Staged& device = *devices_[k];
    if (plan_.devices[k].channels.empty()) continue;
    const auto rows = static_cast<std::int64_t>(device.written), lost = static_cast<std::int64_t>(device.lost);
    if (auto done = writeAt(layout_.devices[k].rowsAt, &rows, sizeof rows); !done) return done;
    if (auto done = writeAt(layout_.devices[k].lostAt, &lost, sizeof lost); !done) return done;
  }
  const auto used = static_cast<std::int64_t>(eventsUsed_);
  if (auto done = writeAt(layout_.eventsUsedAt, &used, sizeof used); !done) return done;
  lastCommit_ = now;
  return {};
}

Result<void> Recorder::endPart(Instant now) {
  for (std::size_t k = 0; k < devices_.size(); ++k) {
    if (auto noted = noteGaps(k, now, Room::end); !noted) return noted;
  }
  if (auto done = commit(now); !done) return done;
  const char complete[8] = {'c', 'o', 'm', 'p', 'l', 'e', 't', 'e'};
  if (auto done = writeAt(layout_.endedAt, complete, sizeof complete); !done) return done;
  if (auto done = sync(); !done) return done;
  std::vector<std::uint64_t> rows;
  for (const auto& device : devices_) rows.push_back(device->written);
  giveBackRoom(descriptor_, layout_, rows, eventsUsed_);
  ::close(descriptor_);
  descriptor_ = -1;
  return {};
}

Result<void> Recorder::append(std::size_t index, const device::SampleBlock& block, std::span<const float> corrected,
                              Instant now) {
  Staged& device = *devices_[index];
  const auto& channels = plan_.devices[index].channels;
  if (channels.empty()) return {};
  device.lost += block.lostBefore;
  const Instant when = block.frames() > 0 ? block.time.front() : now;
  device.lostGap.add(block.lostBefore, when);
  device.damagedGap.add(block.damagedBefore, when);
  if (auto noted = noteGaps(index, when, Room::reports); !noted) return noted;
  for (std::size_t frame = 0; frame < block.frames(); ++frame) {
    if (device.written + device.staged >= layout_.devices[index].capacity) {
      if (auto rolled = rollOver(now, block.time[frame]); !rolled) return rolled;
    }
    const std::size_t row = device.staged;
    device.time[row] = block.time[frame].time_since_epoch().count();
    const std::size_t from = frame * block.inputs, to = row * channels.size();
    for (std::size_t k = 0; k < channels.size(); ++k) {
      const auto column = static_cast<std::size_t>(channels[k].column);
      device.ratio[to + k] = block.ratio[from + column];
      device.corrected[to + k] = corrected[from + column];
      device.flags[to + k] = block.flags[from + column];
    }
    if (++device.staged == kStagedRows) {
      if (auto done = flush(index); !done) return done;
    }
  }
  return commitIfDue(now);
}

Result<void> Recorder::commitIfDue(Instant now) {
  return now - lastCommit_ >= plan_.commitEvery ? commit(now) : Result<void>{};
}

Result<void> Recorder::event(std::string_view kind, Instant when, std::string_view text, std::string_view device,
                             std::uint64_t count) {
  if (kind == kStepBegin) openStep_ = std::string(text);
  if (kind == kStepEnd) openStep_.reset();
  return writeEvent(eventLine(kind, when, text, device, count, false), isOperators(kind) ? Room::marks : Room::reports);
}

Result<void> Recorder::writeEvent(const std::string& line, Room kept) {
  const std::uint64_t all = layout_.eventBytes;
  const std::uint64_t room = kept == Room::end ? all : kept == Room::marks ? all - all / 16 : all - all / 4;
  if (eventsUsed_ + line.size() > room) {
    return fail(ErrorCode::refused, "the recording has no room for more marks and events", path_,
                "start a new recording for more marks; samples go on");
  }
  if (auto done = writeAt(layout_.eventsAt + eventsUsed_, line.data(), line.size()); !done) return done;
  eventsUsed_ += line.size();
  return {};
}

Result<void> Recorder::noteGap(std::size_t index, Gap& gap, Instant now, Room room) {
  if (gap.count == 0 || (room != Room::end && now < gap.quietUntil)) return {};
  auto noted = writeEvent(eventLine(gap.kind, gap.since, gap.text, plan_.devices[index].name, gap.count, false), room);
  gap.quietUntil = now + kGapsTogether;
  // A full store keeps the count for the end, which has room of its own.
  if (!noted) return noted.error().code == ErrorCode::refused ? Result<void>{} : noted;
  gap.count = 0;
  return {};
}

Result<void> Recorder::noteGaps(std::size_t index, Instant now, Room room) {
  for (Gap* gap : {&devices_[index]->lostGap, &devices_[index]->damagedGap}) {
    if (auto done = noteGap(index, *gap, now, room); !done) return done;
  }
  return {};
}

Result<void> Recorder::finish(Instant now) { return descriptor_ < 0 ? Result<void>{} : endPart(now); }

std::uint64_t Recorder::rows(std::size_t index) const {
  const Staged& device = *devices_[index];
  return device.before + device.written + device.staged;
}

std::uint64_t Recorder::lost(std::size_t index) const {
  return devices_[index]->lostBefore + devices_[index]->lost;
}

}  // namespace shuntwright::recording
