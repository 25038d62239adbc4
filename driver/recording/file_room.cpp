#include "driver/recording/file_room.h"

#include <fcntl.h>
#include <sys/stat.h>
#include <sys/statvfs.h>
#include <unistd.h>

#include <algorithm>
#include <cerrno>
#include <cmath>
#include <cstdio>
#include <cstring>
#include <filesystem>
#include <optional>

namespace shuntwright::recording {

namespace {

std::string folderOf(const std::string& path) {
  const auto folder = std::filesystem::path(path).parent_path().string();
  return folder.empty() ? "." : folder;
}

std::optional<double> freeBytes(const std::string& path) {
  struct statvfs disk {};
  if (::statvfs(folderOf(path).c_str(), &disk) != 0 || disk.f_blocks == 0) return std::nullopt;
  return static_cast<double>(disk.f_bavail) * static_cast<double>(disk.f_frsize);
}

std::string megabytes(double bytes) {
  char text[32];
  std::snprintf(text, sizeof text, "%.1f MB", bytes / 1e6);
  return text;
}

Error noRoom(double needed, std::optional<double> free, const std::string& path) {
  return Error(ErrorCode::io,
               "the disk has no room for the recording: one file takes " + megabytes(needed) +
                   (free ? ", free are " + megabytes(*free) : std::string()),
               path, "free some space, name another disk, or give a --duration: less room is then kept");
}

void punch(int descriptor, std::uint64_t from, std::uint64_t size) {
  if (size == 0) return;
  (void)::fallocate(descriptor, FALLOC_FL_PUNCH_HOLE | FALLOC_FL_KEEP_SIZE, static_cast<off_t>(from),
                    static_cast<off_t>(size));
}

void punchRows(int descriptor, const RowPlaces& places, std::uint64_t rows) {
  for (std::uint64_t k = 0; k < places.chunks.size(); ++k) {
    const std::uint64_t first = k * places.rowsPerChunk;
    const std::uint64_t used = rows <= first ? 0 : std::min(places.rowsPerChunk, rows - first);
    punch(descriptor, places.chunks[k] + used * places.rowBytes,
          (places.rowsPerChunk - used) * places.rowBytes);
  }
}

}  // namespace

Result<void> checkRoom(const std::string& path, const RecordingPlan& plan) {
  double needed = static_cast<double>(plan.eventBytes + plan.rackText.size() + plan.calibrationJson.size());
  for (const auto& device : plan.devices) {
    // Time of 8 bytes; ratio, corrected and flags of 4, 4 and 1.
    needed += std::max(1.0, device.rate_Hz * plan.secondsPerFile) *
              (8 + 9 * static_cast<double>(device.channels.size()));
  }
  const auto free = freeBytes(path);
  if (free && *free < needed) return std::unexpected(noRoom(needed, free, path));
  return {};
}

Result<void> reserveRoom(int descriptor, const std::string& path) {
  struct stat file {};
  if (::fstat(descriptor, &file) != 0 || file.st_size == 0) return {};
  int done = 0;
  do {
    done = ::fallocate(descriptor, FALLOC_FL_KEEP_SIZE, 0, file.st_size);
  } while (done != 0 && errno == EINTR);
  if (done != 0 && errno == ENOSPC) {
    return std::unexpected(noRoom(static_cast<double>(file.st_size), freeBytes(path), path));
  }
  return {};
}

void giveBackRoom(int descriptor, const FileLayout& layout, const std::vector<std::uint64_t>& rows,
                  std::uint64_t eventBytes) {
  for (std::size_t k = 0; k < layout.devices.size(); ++k) {
    const DevicePlaces& places = layout.devices[k];
    for (const RowPlaces* one : {&places.time, &places.ratio, &places.corrected, &places.flags}) {
      punchRows(descriptor, *one, rows[k]);
    }
  }
  punch(descriptor, layout.eventsAt + eventBytes, layout.eventBytes - eventBytes);
}

void syncFolder(const std::string& path) {
  const int folder = ::open(folderOf(path).c_str(), O_RDONLY | O_DIRECTORY | O_CLOEXEC);
  if (folder < 0) return;
  (void)::fsync(folder);  // not every file system can
  ::close(folder);
}

}  // namespace shuntwright::recording
