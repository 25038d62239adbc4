#pragma once

#include <gtest/gtest.h>

#include <cstdio>
#include <cstdlib>
#include <filesystem>
#include <string>
#include <vector>

#include "driver/recording/recorder.h"

namespace shuntwright::recording {

inline constexpr Instant kStart = VirtualClock::kDefaultStart;
inline constexpr double kRate_Hz = 1000;

inline RecordingPlan plan(double secondsPerFile) {
  RecordingPlan p;
  p.software = "test";
  p.rackName = "bench";
  p.rackText = "[rack]\n";
  p.calibrationId = "20260504-093000-0000";
  p.calibrationJson = "{}";
  p.started = kStart;
  p.secondsPerFile = secondsPerFile;
  RecordedDevice device;
  device.name = "amp1";
  device.rate_Hz = kRate_Hz;
  device.channels = {{"S01", "microstrain", 0, true, 2000, 0, -2, 1e6},
                     {"S, \"2\"", "kN", 2, false, 1, 0, 0, 1}};
  p.devices.push_back(device);
  return p;
}

/// Every value is a function of its row, so that content can be checked.
inline float ratioOf(std::uint64_t row, std::size_t column) {
  return static_cast<float>(row % 100000) * 1e-8f + static_cast<float>(column);
}

inline device::SampleBlock block(std::uint64_t firstRow, std::size_t frames) {
  device::SampleBlock b;
  b.inputs = 3;
  for (std::size_t f = 0; f < frames; ++f) {
    b.time.push_back(kStart + fromSeconds(static_cast<double>(firstRow + f) / kRate_Hz));
    for (std::size_t k = 0; k < 3; ++k) {
      b.ratio.push_back(ratioOf(firstRow + f, k));
      b.flags.push_back(static_cast<std::uint8_t>((firstRow + f) % 50 == 0 ? device::kSwitching : 0));
    }
  }
  return b;
}

inline std::vector<float> corrected(const device::SampleBlock& b) {
  std::vector<float> out;
  for (const float r : b.ratio) out.push_back(2 * r);
  return out;
}

class RecorderTest : public ::testing::Test {
 protected:
  void SetUp() override {
    char pattern[] = "/tmp/shuntwright-recording-XXXXXX";
    folder_ = ::mkdtemp(pattern);
    path_ = folder_ + "/run.h5";
  }
  void TearDown() override { std::filesystem::remove_all(folder_); }

  static void append(Recorder& recorder, std::uint64_t first, std::size_t frames, std::uint64_t lost = 0) {
    auto b = block(first, frames);
    b.lostBefore = lost;
    const auto c = corrected(b);
    auto done = recorder.append(0, b, c, b.time.back());
    ASSERT_TRUE(done.has_value()) << done.error().text();
  }

  /// Runs a Python program (Debian's own, which sees h5py) and gives what it printed.
  static std::string python(const std::string& program, const std::string& arguments) {
    const std::string command = "/usr/bin/python3 -c '" + program + "' " + arguments + " 2>&1";
    FILE* pipe = ::popen(command.c_str(), "r");
    std::string out;
    char buffer[4096];
    while (const std::size_t got = std::fread(buffer, 1, sizeof buffer, pipe)) out.append(buffer, got);
    ::pclose(pipe);
    return out;
  }

  std::string folder_, path_;
};

}  // namespace shuntwright::recording
