#pragma once

#include <chrono>
#include <condition_variable>
#include <cstdint>
#include <deque>
#include <map>
#include <memory>
#include <mutex>
#include <optional>
#include <string>
#include <vector>

#include "driver/core/error.h"
#include "driver/device/sample_block.h"

namespace shuntwright::plugin {

/// Samples of one device, corrected.
struct Block {
  std::string device;
  device::SampleBlock samples;
  std::vector<float> corrected;
  std::uint64_t lost = 0;     ///< frames, just before these
  std::uint64_t damaged = 0;  ///< lines that could not be read, likewise
  std::size_t taken = 0;  ///< frames given to the host already
};

/// Samples on their way from the session's thread to the host's. Every call from any thread.
class BlockQueue {
 public:
  void clear();
  /// Adds a block and keeps at most `most` frames of its device: what is dropped is counted as lost in the next one.
  void push(std::unique_ptr<Block> block, std::size_t most);
  /// What ended the acquisition; told once the queue is empty.
  void end(Error error);

  /// Errors: timeout, or what ended the acquisition.
  Result<std::unique_ptr<Block>> take(std::chrono::milliseconds timeout);

  /// Waits a little for the host when many blocks stand here; false when there is room.
  bool waitForRoom();
  void wake();

 private:
  void dropOldest(const std::string& device, std::size_t most);

  std::mutex mutex_;
  std::condition_variable arrived_, taken_;
  std::deque<std::unique_ptr<Block>> blocks_;
  std::map<std::string, std::size_t> frames_;
  struct Gone {
    std::uint64_t lost = 0, damaged = 0;
  };
  std::map<std::string, Gone> dropped_;
  std::optional<Error> error_;
};

}  // namespace shuntwright::plugin
