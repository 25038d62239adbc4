// proves P-10
#include <gtest/gtest.h>

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/io_context.hpp>
#include <cstddef>
#include <cstdio>
#include <cstdlib>
#include <cstring>
#include <filesystem>
#include <fstream>
#include <sstream>
#include <vector>

#include "driver/calibration/record_json.h"
#include "driver/correction/live_correction.h"
#include "driver/plugin/shuntwright_plugin.h"
#include "driver/rack/acquisition.h"
#include "driver/transport/replay_stream.h"
#include "driver/transport/trace.h"
#include "driver/transport/tracing_stream.h"
#include "tests/support/virtual_bench.h"
#include "tools/simhost/serve.h"

namespace shuntwright {
namespace {

namespace asio = boost::asio;

constexpr int kFrames = 100;

/// Calibrates and then samples a rack through an opener, in virtual time; writes what a host would print.
struct Library {
  const description::Rack& rack;
  transport::Opener opener;
  VirtualClock& clock;
  std::ostringstream out;
  Result<void> result;

  Task<Result<void>> all() {
    rack::MemoryJournal journal;
    auto live = co_await rack::LiveRack::open(rack, opener, clock, journal);
    if (!live) co_return std::unexpected(std::move(live.error()));
    Random random(1);
    const auto permit = test::VirtualBench::permit(rack);
    const calibration::Options options;
    auto record = co_await calibration::calibrate(**live, permit, random, options);
    if (!record) co_return std::unexpected(std::move(record.error()));
    out << "record " << calibration::recordJson(*record) << '\n';
    auto correction = correction::LiveCorrection::of(rack, *record, "amp1");
    if (!correction) co_return std::unexpected(std::move(correction.error()));
    int wanted = kFrames;
    rack::AcquisitionSink sink;
    sink.block = [&](const std::string&, device::SampleBlock& block) {
      std::vector<float> corrected(block.ratio.size());
      correction->apply(block, corrected);
      for (std::size_t f = 0; f < block.frames() && wanted > 0; ++f, --wanted) print(block, corrected, f);
    };
    const std::function<bool()> stop = [&] { return wanted <= 0; };
    auto done = co_await rack::acquire(**live, permit, sink, stop);
    (*live)->close();
    co_return done;
  }

  void print(const device::SampleBlock& block, const std::vector<float>& corrected, std::size_t f) {
    out << "sample " << block.time[f].time_since_epoch().count();
    for (std::size_t k = 0; k < 4; ++k) {
      char text[96];
      std::snprintf(text, sizeof text, " %a %a %u", static_cast<double>(block.at(f, k)),
                    static_cast<double>(corrected[f * block.inputs + k]), block.flagsAt(f, k));
      out << text;
    }
    out << '\n';
  }

  static Task<void> store(Library* self) { self->result = co_await self->all(); }

  void run() {
    asio::io_context context;
    bool ended = false;
    Library* self = this;
    asio::co_spawn(
        context, [self]() -> Task<void> { return store(self); }, [&ended](std::exception_ptr) { ended = true; });
    runVirtual(context, clock, [&ended] { return ended; });
    ASSERT_TRUE(result.has_value()) << result.error().text();
  }
};

class PluginTest : public ::testing::Test {
 protected:
  void SetUp() override {
    char pattern[] = "/tmp/shuntwright-plugin-XXXXXX";
    folder_ = ::mkdtemp(pattern);
    trace_ = folder_ + "/bench.trace";
  }
  void TearDown() override { std::filesystem::remove_all(folder_); }

  static std::string rackFile() { return std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles/racks/small_bench.toml"; }

  void makeTrace(const description::Rack& rack) {
    VirtualClock clock;
    sim::Bench bench(rack, {}, 11, clock.now());
    auto opener = transport::tracingOpener(simhost::memoryOpener(bench, clock), trace_, clock);
    ASSERT_TRUE(opener.has_value());
    // Longer than what is compared: the host stops reading when it likes.
    Library traced{rack, *opener, clock, {}, {}};
    traced.run();
  }

  std::string folder_, trace_;
};

std::string linesStarting(const std::string& text, const std::string& word) {
  std::istringstream in(text);
  std::string line, out;
  while (std::getline(in, line)) {
    if (line.starts_with(word)) out += line + "\n";
  }
  return out;
}

TEST_F(PluginTest, aHostInCGetsTheNumbersOfTheLibraryBitForBit) {
  const auto rack = test::shippedRack("small_bench.toml");
  makeTrace(rack);
  auto trace = transport::loadTrace(trace_);
  ASSERT_TRUE(trace.has_value()) << trace.error().text();
  VirtualClock clock(trace->start);
  Library library{rack, transport::replayOpener(*trace, trace_, clock), clock, {}, {}};
  library.run();

  const std::string command = std::string(SHUNTWRIGHT_BIN_DIR) + "/plugin_host " + SHUNTWRIGHT_BIN_DIR +
                              "/shuntwright-plugin.so " + rackFile() + " " + trace_ + " " + std::to_string(kFrames) + " 2>&1";
  std::string host;
  FILE* pipe = ::popen(command.c_str(), "r");
  ASSERT_NE(pipe, nullptr);
  char buffer[4096];
  while (const std::size_t got = std::fread(buffer, 1, sizeof buffer, pipe)) host.append(buffer, got);
  EXPECT_EQ(::pclose(pipe), 0) << host;

  // The rack file's path is part of the record; both name the same file by different spellings at most.
  EXPECT_EQ(linesStarting(host, "record "), linesStarting(library.out.str(), "record "));
  EXPECT_EQ(linesStarting(host, "sample "), linesStarting(library.out.str(), "sample "));
  EXPECT_NE(host.find("windows 24"), std::string::npos) << "progress came on the calling thread";
  EXPECT_NE(host.find("channel Q3 amp1 1 microstrain 1"), std::string::npos);
  EXPECT_NE(host.find("channel F1 amp1 4 kN 1"), std::string::npos);
}

TEST_F(PluginTest, misuseIsAnErrorAndNoCrash) {
  const shuntwright_table* api = shuntwright_plugin_table(SHUNTWRIGHT_ABI_VERSION);
  ASSERT_NE(api, nullptr);
  EXPECT_EQ(shuntwright_plugin_table(0), nullptr);
  EXPECT_EQ(api->open(nullptr, nullptr), SHUNTWRIGHT_BAD_USE);
  shuntwright_open_options options{};
  shuntwright_session* session = nullptr;
  EXPECT_EQ(api->open(&options, &session), SHUNTWRIGHT_BAD_USE) << "struct_size is 0";
  options.struct_size = sizeof options;
  options.rack_file = "/nowhere/rack.toml";
  EXPECT_EQ(api->open(&options, &session), SHUNTWRIGHT_BAD_FILE);
  ASSERT_NE(session, nullptr);
  EXPECT_NE(std::string(api->last_error(session)).find("/nowhere/rack.toml"), std::string::npos);
  EXPECT_EQ(api->start(session), SHUNTWRIGHT_BAD_USE);
  EXPECT_EQ(api->calibrate(session, nullptr, nullptr, nullptr), SHUNTWRIGHT_BAD_USE);
  EXPECT_EQ(api->use_calibration(session, nullptr), SHUNTWRIGHT_BAD_USE);
  shuntwright_block block{};
  EXPECT_EQ(api->read(session, 1, &block), SHUNTWRIGHT_BAD_USE);
  uint32_t count = 0;
  EXPECT_EQ(api->channel_count(nullptr, &count), SHUNTWRIGHT_BAD_USE);
  api->close(session);
  api->close(nullptr);
}

TEST_F(PluginTest, aCalibrationIsCancelledFromItsProgressAndTheSessionGoesOn) {
  makeTrace(test::shippedRack("small_bench.toml"));
  const shuntwright_table* api = shuntwright_plugin_table(SHUNTWRIGHT_ABI_VERSION);
  shuntwright_open_options options{};
  options.struct_size = sizeof options;
  options.isolated = 1;
  const std::string rack = rackFile();
  options.rack_file = rack.c_str();
  options.replay_file = trace_.c_str();
  struct Host {
    const shuntwright_table* api;
    shuntwright_session* session = nullptr;
    int told = 0;
  } host{api};
  ASSERT_EQ(api->open(&options, &host.session), SHUNTWRIGHT_OK) << api->last_error(host.session);
  EXPECT_EQ(api->cancel(host.session), SHUNTWRIGHT_OK) << "nothing is under way, nothing happens";
  const auto stopAtTheThird = [](void* user, const shuntwright_progress*) {
    auto* h = static_cast<Host*>(user);
    if (++h->told == 3) h->api->cancel(h->session);
  };
  const char* record = nullptr;
  EXPECT_EQ(api->calibrate(host.session, stopAtTheThird, &host, &record), SHUNTWRIGHT_CANCELLED);
  EXPECT_EQ(record, nullptr) << "half a calibration is none";
  EXPECT_EQ(host.told, 3);
  uint32_t count = 0;
  EXPECT_EQ(api->channel_count(host.session, &count), SHUNTWRIGHT_OK) << "the session lives on";
  EXPECT_EQ(api->cancel(nullptr), SHUNTWRIGHT_BAD_USE);
  api->close(host.session);
}

TEST_F(PluginTest, whatWasQueuedIsReadAfterStopAndOlderStructsAreFilledAsFarAsTheyGo) {
  makeTrace(test::shippedRack("small_bench.toml"));
  const shuntwright_table* api = shuntwright_plugin_table(SHUNTWRIGHT_ABI_VERSION);
  shuntwright_open_options options{};
  options.struct_size = sizeof options;
  options.isolated = 1;
  const std::string rack = rackFile();
  options.rack_file = rack.c_str();
  options.replay_file = trace_.c_str();
  shuntwright_session* session = nullptr;
  ASSERT_EQ(api->open(&options, &session), SHUNTWRIGHT_OK) << api->last_error(session);

  // A host built when the struct ended before `unit`.
  shuntwright_channel channel{};
  channel.struct_size = offsetof(shuntwright_channel, unit);
  channel.unit = "untouched";
  EXPECT_EQ(api->channel(session, 0, &channel), SHUNTWRIGHT_OK) << api->last_error(session);
  EXPECT_STREQ(channel.name, "Q3");
  EXPECT_STREQ(channel.unit, "untouched");

  const char* record = nullptr;
  ASSERT_EQ(api->calibrate(session, nullptr, nullptr, &record), SHUNTWRIGHT_OK) << api->last_error(session);
  ASSERT_EQ(api->start(session), SHUNTWRIGHT_OK) << api->last_error(session);
  std::vector<float> ratio(16);
  shuntwright_block block{};
  block.struct_size = offsetof(shuntwright_block, lost);  // likewise
  block.lost = 77;
  block.frames_capacity = 1;
  block.values_capacity = 16;
  block.ratio = ratio.data();
  ASSERT_EQ(api->read(session, 5000, &block), SHUNTWRIGHT_OK) << api->last_error(session);
  EXPECT_EQ(block.frames, 1u);
  EXPECT_EQ(block.lost, 77u) << "beyond what the host knows nothing is written";
  ASSERT_EQ(api->stop(session), SHUNTWRIGHT_OK) << api->last_error(session);
  // The trace holds a hundred frames and more came than were read.
  std::uint32_t after = 0;
  int code = SHUNTWRIGHT_OK;
  while ((code = api->read(session, 0, &block)) == SHUNTWRIGHT_OK) after += block.frames;
  EXPECT_EQ(code, SHUNTWRIGHT_BAD_USE) << "then it is over";
  EXPECT_GT(after, 0u);
  api->close(session);
}

TEST_F(PluginTest, oneSymbolIsExported) {
  const std::string command = std::string("nm -D --defined-only ") + SHUNTWRIGHT_BIN_DIR + "/shuntwright-plugin.so";
  std::string symbols;
  FILE* pipe = ::popen(command.c_str(), "r");
  ASSERT_NE(pipe, nullptr);
  char buffer[4096];
  while (const std::size_t got = std::fread(buffer, 1, sizeof buffer, pipe)) symbols.append(buffer, got);
  ASSERT_EQ(::pclose(pipe), 0);
  // Sanitizers bring their own.
  std::istringstream lines(symbols);
  std::string address, type, name, ours;
  while (lines >> address >> type >> name) {
    if (name.find("asan") == std::string::npos && name.find("ubsan") == std::string::npos) ours += name + " ";
  }
  EXPECT_EQ(ours, "shuntwright_plugin_table ");
}

TEST_F(PluginTest, withoutTheConfirmationNothingIsShunted) {
  makeTrace(test::shippedRack("small_bench.toml"));
  const shuntwright_table* api = shuntwright_plugin_table(SHUNTWRIGHT_ABI_VERSION);
  shuntwright_open_options options{};
  options.struct_size = sizeof options;
  const std::string rack = rackFile();
  options.rack_file = rack.c_str();
  options.replay_file = trace_.c_str();
  shuntwright_session* session = nullptr;
  ASSERT_EQ(api->open(&options, &session), SHUNTWRIGHT_OK) << api->last_error(session);
  EXPECT_EQ(api->calibrate(session, nullptr, nullptr, nullptr), SHUNTWRIGHT_REFUSED);
  EXPECT_NE(std::string(api->last_error(session)).find("isolated"), std::string::npos);
  EXPECT_EQ(api->start(session), SHUNTWRIGHT_REFUSED) << "starting sets rates";
  EXPECT_EQ(api->use_calibration(session, "{}"), SHUNTWRIGHT_BAD_FILE);
  api->close(session);
}

}  // namespace
}  // namespace shuntwright
