#pragma once

#include <boost/asio/io_context.hpp>
#include <functional>
#include <memory>
#include <optional>
#include <string>

#include "driver/calibration/calibrate.h"
#include "driver/core/clock.h"
#include "driver/description/load.h"
#include "driver/rack/live_rack.h"
#include "sim/amplifier/bench.h"

namespace shuntwright::test {

/// A shipped rack, loaded or the test fails.
description::Rack shippedRack(const std::string& name);  ///< "small_bench.toml"

/// A rack and its simulator in one thread and in virtual time.
class VirtualBench {
 public:
  /// @param real  what the bench really is, where it is not what the rack says.
  VirtualBench(description::Rack rack, sim::Scenario scenario = {}, std::uint64_t seed = 1,
               std::optional<description::Rack> real = {});
  ~VirtualBench();

  /// Opens the rack, calibrates it and closes it again.
  Result<calibration::Record> calibrate(calibration::Options options = {});
  /// Where a cancellation may come: between two moments of the clock, or between any two handlers of the loop, which
  /// is at every single await.
  enum class Grain { clock, handler };
  /// The same, cancelled after that many steps; nothing when it ended before by itself.
  std::optional<std::string> calibrateCancelledAfter(std::size_t steps, Grain grain = Grain::clock);
  std::size_t stepsTaken() const { return steps_; }

  /// Runs any coroutine on the live rack.
  Result<void> onRack(std::function<Task<Result<void>>(rack::LiveRack&)> body);

  static rack::LoadPathPermit permit(const description::Rack& rack);

  const description::Rack rack;
  VirtualClock clock;
  rack::MemoryJournal journal;
  std::string traceFile;  ///< when set, what goes over the wires is written there
  std::unique_ptr<sim::Bench> bench;

 private:
  std::optional<description::Rack> real_;
  std::uint64_t seed_;
  std::size_t steps_ = 0;
};

}  // namespace shuntwright::test
