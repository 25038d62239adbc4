#pragma once

#include <memory>
#include <set>
#include <string>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/description/rack.h"

namespace shuntwright::rack {

/// Remembers which relays may be closed, so that another process can open them after a crash. The intent is
/// written before a close command goes out, the end only when the relay is known to be open.
class RelayJournal {
 public:
  virtual ~RelayJournal() = default;
  virtual Result<void> closing(const description::RelayRef& relay, Instant when) = 0;
  virtual Result<void> opened(const description::RelayRef& relay, Instant when) = 0;
  /// Relays that an earlier run may have left closed.
  virtual std::set<description::RelayRef> unresolved() const = 0;
};

/// For simulated and replayed racks, where no relay outlives the process.
class MemoryJournal final : public RelayJournal {
 public:
  Result<void> closing(const description::RelayRef& relay, Instant) override;
  Result<void> opened(const description::RelayRef& relay, Instant) override;
  std::set<description::RelayRef> unresolved() const override { return closed_; }

 private:
  std::set<description::RelayRef> closed_;
};

/// A text file, one line an event ("closing relays1/3 2026-05-04T09:30:00.000Z"), synced to the disk line by
/// line; emptied whenever no relay is left closed. A torn last line is ignored on reading: its command had
/// not gone out yet.
class FileJournal final : public RelayJournal {
 public:
  /// Errors: io.
  static Result<std::unique_ptr<FileJournal>> open(const std::string& path);
  ~FileJournal() override;

  Result<void> closing(const description::RelayRef& relay, Instant when) override;
  Result<void> opened(const description::RelayRef& relay, Instant when) override;
  std::set<description::RelayRef> unresolved() const override { return closed_; }

 private:
  FileJournal(std::string path, int descriptor) : path_(std::move(path)), descriptor_(descriptor) {}
  Result<void> line(const char* word, const description::RelayRef& relay, Instant when);

  std::string path_;
  int descriptor_;
  bool torn_ = false;  ///< the file ends inside a line
  std::set<description::RelayRef> closed_;
};

/// What a folder keeps of a rack starts with this: one name a rack file, so that two racks of the same name in
/// different folders share nothing.
std::string stateName(const std::string& folder, const description::Rack& rack);
std::string journalPath(const std::string& folder, const description::Rack& rack);

std::string text(const description::RelayRef& relay);  ///< "relays1/3"

}  // namespace shuntwright::rack
