#pragma once

#include <functional>
#include <map>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "driver/correction/derived_channels.h"
#include "driver/correction/live_correction.h"
#include "driver/rack/acquisition.h"
#include "driver/recording/recorder.h"

namespace shuntwright::cli {

/// What a viewer shows of a channel.
struct LiveValue {
  std::string channel, unit;
  float value = 0, ratio = 0, least = 0, most = 0;  ///< least and most since the start
  std::uint8_t flags = 0;
  bool calibrated = false;
  std::uint64_t samples = 0;
};

/// Joins acquisition, live correction and the recorder: what `record` and `demo` do with each block.
class RecordingSession {
 public:
  /// @param path  of the recording; empty: nothing is written (live only).
  /// @param expected_s  how long it will last: a file keeps room for that and not for an hour; 0: unknown
  /// Errors: those of LiveCorrection and Recorder.
  static Result<std::unique_ptr<RecordingSession>> begin(const description::Rack& rack, const calibration::Record& record,
                                                         const std::string& path, Clock& clock,
                                                         double expected_s = 0);

  /// Records until `stopWanted`. Errors: the acquisition's, or the recorder's (disk full: everything before is
  /// kept).
  Task<Result<void>> run(rack::LiveRack& live, rack::LoadPathPermit permit, std::function<bool()> stopWanted);

  Result<void> mark(std::string_view kind, std::string_view text);
  Result<void> finish();

  const std::vector<LiveValue>& live() const { return live_; }
  /// Told of every sample of every channel, by its place in live().
  std::function<void(std::size_t channel, Instant when, float ratio, float corrected, std::uint8_t flags)> onSample;
  std::uint64_t lost() const;
  std::uint64_t rows() const;
  /// Every file of the recording, in order.
  std::vector<std::string> paths() const { return recorder_ ? recorder_->paths() : std::vector<std::string>(); }
  std::string path() const { return recorder_ ? recorder_->path() : std::string(); }
  const std::string& trouble() const { return trouble_; }  ///< of a device, now; empty: none

 private:
  RecordingSession(Clock& clock) : clock_(clock) {}
  void take(std::size_t index, device::SampleBlock& block);
  void keep(std::size_t index, const device::SampleBlock& block, const std::vector<float>& corrected);

  Clock& clock_;
  std::vector<correction::LiveCorrection> corrections_;
  correction::DerivedChannels derived_;
  std::map<std::string, std::size_t> index_;
  std::vector<std::vector<std::size_t>> liveIndex_;  ///< per device and column: place in live_, or npos
  std::vector<LiveValue> live_;
  std::unique_ptr<recording::Recorder> recorder_;
  std::vector<float> corrected_, widenedValues_;
  device::SampleBlock widened_;  ///< with the derived columns
  std::optional<Error> failed_;
  std::string trouble_;
};

}  // namespace shuntwright::cli
