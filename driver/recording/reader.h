#pragma once

#include <cstdint>
#include <memory>
#include <string>
#include <vector>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/recording/plan.h"

namespace shuntwright::recording {

struct RecordedEvent {
  Instant when;
  std::string kind, text, device;
  std::uint64_t count = 0;
  bool continued = false;  ///< a step that goes on from the part before
};

/// Rows [first, first + count) of one device. Shapes: time count, the others count x channels, row-major.
struct Rows {
  std::vector<Instant> time;
  std::vector<float> ratio, corrected;
  std::vector<std::uint8_t> flags;
};

/// Reads one file of a recording, whether it was ended, killed or is still being written: what the row
/// counters say is there, and nothing else.
class Reader {
 public:
  /// Errors: io; bad_file when it is no recording of ours.
  static Result<std::unique_ptr<Reader>> open(const std::string& path);
  ~Reader();

  const std::vector<RecordedDevice>& devices() const;
  std::uint64_t rows(std::size_t device) const;
  std::uint64_t lost(std::size_t device) const;
  bool complete() const;                  ///< ended properly
  int part() const;
  Instant started() const;                ///< of the recording; the same in every part
  const std::string& path() const;
  std::string rackName() const;
  std::string calibrationId() const;
  std::string calibrationJson() const;
  const std::vector<RecordedEvent>& events() const;

  /// Errors: bad_use beyond rows(); io.
  Result<Rows> read(std::size_t device, std::uint64_t first, std::uint64_t count) const;

 private:
  struct State;
  explicit Reader(std::unique_ptr<State> state);
  std::unique_ptr<State> state_;
};

/// The file and, when it is a first part, every further part of the same recording that lies beside it, in order.
/// A file among them that is no part of it is passed over. Errors: the reader's for the first.
Result<std::vector<std::unique_ptr<Reader>>> openParts(const std::string& path);

}  // namespace shuntwright::recording
