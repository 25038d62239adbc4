#include "tools/cli/recording_session.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <cmath>

#include "driver/calibration/record_json.h"

namespace shuntwright::cli {

namespace {
constexpr std::size_t kNowhere = static_cast<std::size_t>(-1);
}

Result<std::unique_ptr<RecordingSession>> RecordingSession::begin(const description::Rack& rack,
                                                                  const calibration::Record& record,
                                                                  const std::string& path, Clock& clock,
                                                                  double expected_s) {
  std::unique_ptr<RecordingSession> session(new RecordingSession(clock));
  for (const auto& device : rack.devices) {
    if (!device.profile->inputs) continue;
    auto correction = correction::LiveCorrection::of(rack, record, device.name);
    if (!correction) return std::unexpected(std::move(correction.error()));
    session->index_[device.name] = session->corrections_.size();
    std::vector<std::size_t> places;
    for (const auto& column : correction->columns()) {
      places.push_back(column.channel.empty() ? kNowhere : session->live_.size());
      if (column.channel.empty()) continue;
      LiveValue value;
      value.channel = column.channel;
      value.unit = column.unit;
      value.calibrated = column.calibrated;
      session->live_.push_back(std::move(value));
    }
    session->liveIndex_.push_back(std::move(places));
    session->corrections_.push_back(std::move(*correction));
  }
  auto derived = correction::DerivedChannels::of(rack, record, session->corrections_);
  if (!derived) return std::unexpected(std::move(derived.error()));
  session->derived_ = std::move(*derived);
  for (std::size_t d = 0; d < session->corrections_.size(); ++d) {
    for (const auto& column : session->derived_.columns(d)) {
      session->liveIndex_[d].push_back(session->live_.size());
      LiveValue value;
      value.channel = column.name;
      value.unit = column.unit;
      value.calibrated = column.calibrated;
      session->live_.push_back(std::move(value));
    }
  }
  if (path.empty()) return session;
  auto plan = recording::planOf(rack, record, calibration::recordJson(record), session->corrections_, clock.now(), session->derived_);
  // A little more: devices and clocks are not quite exact.
  if (expected_s > 0) plan.secondsPerFile = std::min(plan.secondsPerFile, 1.05 * expected_s + 10);
  auto recorder = recording::Recorder::create(path, std::move(plan));
  if (!recorder) return std::unexpected(std::move(recorder.error()));
  session->recorder_ = std::move(*recorder);
  return session;
}

void RecordingSession::take(std::size_t index, device::SampleBlock& block) {
  if (failed_) return;
  corrected_.resize(block.ratio.size());
  corrections_[index].apply(block, corrected_);
  if (!derived_.wants(index)) return keep(index, block, corrected_);
  derived_.apply(index, block, corrected_, widened_, widenedValues_);
  keep(index, widened_, widenedValues_);
}

void RecordingSession::keep(std::size_t index, const device::SampleBlock& block, const std::vector<float>& corrected) {
  if (recorder_) {
    if (auto kept = recorder_->append(index, block, corrected, clock_.now()); !kept) {
      failed_ = std::move(kept.error());
      return;
    }
  }
  for (std::size_t frame = 0; frame < block.frames(); ++frame) {
    for (std::size_t k = 0; k < block.inputs; ++k) {
      const std::size_t at = liveIndex_[index][k];
      if (at == kNowhere) continue;
      LiveValue& shown = live_[at];
      shown.value = corrected[frame * block.inputs + k];
      shown.ratio = block.at(frame, k);
      shown.flags = block.flagsAt(frame, k);
      if (onSample) onSample(at, block.time[frame], shown.ratio, shown.value, shown.flags);
      if (!std::isfinite(shown.value)) continue;
      shown.least = shown.samples == 0 ? shown.value : std::min(shown.least, shown.value);
      shown.most = shown.samples == 0 ? shown.value : std::max(shown.most, shown.value);
      ++shown.samples;
    }
  }
}

Task<Result<void>> RecordingSession::run(rack::LiveRack& live, rack::LoadPathPermit permit, std::function<bool()> stopWanted) {
  rack::AcquisitionSink sink;
  sink.block = [this](const std::string& device, device::SampleBlock& block) { take(index_.at(device), block); };
  sink.fault = [this](const std::string& device, const Error& error) {
    trouble_ = device + ": " + error.message;
    // A full event store is no reason to stop samples.
    if (recorder_) (void)recorder_->event("fault", clock_.now(), error.text(), device);
  };
  sink.recovered = [this](const std::string& device) {
    trouble_.clear();
    if (recorder_) (void)recorder_->event("recovered", clock_.now(), "samples come again", device);
  };
  const std::function<bool()> stop = [this, stopWanted] {
    // Marks and faults reach the disk while no samples come, too.
    if (recorder_ && !failed_) {
      if (auto kept = recorder_->commitIfDue(clock_.now()); !kept) failed_ = std::move(kept.error());
    }
    return failed_.has_value() || stopWanted();
  };
  auto done = co_await rack::acquire(live, permit, sink, stop);
  if (failed_) co_return std::unexpected(*failed_);
  co_return done;
}

Result<void> RecordingSession::mark(std::string_view kind, std::string_view text) {
  if (!recorder_) return {};
  auto kept = recorder_->event(kind, clock_.now(), text);
  if (!kept) trouble_ = kept.error().message;
  return kept;
}

Result<void> RecordingSession::finish() { return recorder_ ? recorder_->finish(clock_.now()) : Result<void>{}; }

std::uint64_t RecordingSession::lost() const {
  std::uint64_t sum = 0;
  for (std::size_t k = 0; recorder_ && k < corrections_.size(); ++k) sum += recorder_->lost(k);
  return sum;
}

std::uint64_t RecordingSession::rows() const {
  std::uint64_t sum = 0;
  for (std::size_t k = 0; recorder_ && k < corrections_.size(); ++k) sum += recorder_->rows(k);
  return sum;
}

}  // namespace shuntwright::cli
