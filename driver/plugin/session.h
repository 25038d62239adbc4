#pragma once

#include <cstdint>
#include <functional>
#include <memory>
#include <optional>
#include <string>

#include "driver/calibration/calibrate.h"
#include "driver/correction/live_correction.h"
#include "driver/description/rack.h"
#include "driver/plugin/block_queue.h"

namespace shuntwright::plugin {

struct SessionOptions {
  bool isolated = false;
  std::string rackFile, stateFolder, lockFolder, replayFile;
  std::uint64_t seed = 0;
};

/// A rack on a thread of its own. Calls come from the host's thread and block; see shuntwright_plugin.h for what
/// holds between them.
class Session {
 public:
  explicit Session(SessionOptions options);
  ~Session();

  Result<void> open();
  const description::Rack* rack() const;
  Result<void> calibrate(std::function<void(const calibration::Progress&)> progress, std::string& recordJson);
  /// Ends a calibration under way, which then fails with `cancelled`; from any thread.
  void cancel();
  Result<void> use(calibration::Record record);
  const calibration::Record* record() const { return record_ ? &*record_ : nullptr; }

  Result<void> start();
  /// The next block, or an error timeout. Valid until the next call.
  Result<Block*> next(std::uint32_t timeout_ms);
  Result<void> stop();
  Result<void> release();

 private:
  struct Thread;
  SessionOptions options_;
  std::optional<description::Rack> rack_;
  std::optional<calibration::Record> record_;
  std::unique_ptr<Thread> thread_;
  std::unique_ptr<Block> current_;
};

}  // namespace shuntwright::plugin
