// What happens at the end of a file, of the disk and of the room for events.
#include <fcntl.h>
#include <gtest/gtest.h>
#include <sys/stat.h>
#include <unistd.h>

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <sstream>

#include "driver/recording/csv.h"
#include "driver/recording/load_steps.h"
#include "driver/recording/reader.h"
#include "tests/driver/recording/recorder_fixture.h"

namespace shuntwright::recording {
namespace {

using PartsAndRoom = RecorderTest;

TEST_F(PartsAndRoom, aStepThatRunsOverTheEndOfAFileIsOneStep) {
  auto recorder = Recorder::create(path_, plan(0.5));
  ASSERT_TRUE(recorder.has_value());
  const auto at = [](double s) { return kStart + fromSeconds(s); };
  ASSERT_TRUE((*recorder)->event(kStepBegin, at(0.1), "50 %").has_value());
  for (std::uint64_t from = 0; from < 1500; from += 250) append(**recorder, from, 250);
  ASSERT_TRUE((*recorder)->event(kStepEnd, at(1.4), "").has_value());
  for (std::uint64_t from = 1500; from < 2000; from += 250) append(**recorder, from, 250);
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());

  auto parts = openParts(path_);
  ASSERT_TRUE(parts.has_value());
  ASSERT_EQ(parts->size(), 4u);
  std::vector<std::string> paths;
  for (const auto& part : *parts) paths.push_back(part->path());
  EXPECT_EQ((*recorder)->paths(), paths);
  auto steps = loadSteps(*parts);
  ASSERT_TRUE(steps.has_value());
  ASSERT_EQ(steps->size(), 1u);
  EXPECT_EQ((*steps)[0].label, "50 %");
  EXPECT_EQ((*steps)[0].begin, at(0.1));
  EXPECT_EQ((*steps)[0].end, at(1.4));
  // Rows 100 to 1400 without the flagged ones (every 50th).
  EXPECT_EQ((*steps)[0].channels[0].samples, 1301u - 27u);

  // Read alone, a further part has its share of the hold.
  auto second = openParts(partPath(path_, 2));
  ASSERT_TRUE(second.has_value());
  ASSERT_EQ(second->size(), 1u);
  auto share = loadSteps(*second);
  ASSERT_TRUE(share.has_value());
  ASSERT_EQ(share->size(), 1u);
  EXPECT_EQ((*share)[0].label, "50 %");
  EXPECT_EQ((*share)[0].begin, (*second)[0]->read(0, 0, 1)->time[0]);
  EXPECT_TRUE((*second)[0]->events().at(0).continued);
  // The hold has ended: the last part begins none.
  EXPECT_TRUE((*parts)[3]->events().empty());
}

TEST_F(PartsAndRoom, everyPartIsInOneTableWithOneHeader) {
  auto recorder = Recorder::create(path_, plan(0.5));
  ASSERT_TRUE(recorder.has_value());
  for (std::uint64_t from = 0; from < 1000; from += 250) append(**recorder, from, 250);
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());
  // A stranger in between and an older recording's later part are no part of it.
  std::filesystem::copy(partPath(path_, 2), partPath(path_, 3));
  auto parts = openParts(path_);
  ASSERT_TRUE(parts.has_value());
  EXPECT_EQ(parts->size(), 2u);
  std::ostringstream out;
  ASSERT_TRUE(writeCsv(*parts, {}, out).has_value());
  const std::string text = out.str();
  EXPECT_EQ(std::count(text.begin(), text.end(), '\n'), 1001);
  EXPECT_NE(text.find(",0.999,"), std::string::npos) << "seconds count from the first part's first row";
}

std::uint64_t onDisk(const std::string& path) {
  struct stat file {};
  ::stat(path.c_str(), &file);
  return static_cast<std::uint64_t>(file.st_blocks) * 512;
}

TEST_F(PartsAndRoom, theWholeRoomIsReservedAtTheStartAndWhatWasNotUsedGivenBack) {
  const int probe = ::open((folder_ + "/probe").c_str(), O_CREAT | O_WRONLY | O_CLOEXEC, 0600);
  const bool reserves = ::fallocate(probe, 0, 0, 4096) == 0;
  ::close(probe);
  if (!reserves) GTEST_SKIP() << "this file system reserves no room";
  auto recorder = Recorder::create(path_, plan(1000));
  ASSERT_TRUE(recorder.has_value());
  const auto size = std::filesystem::file_size(path_);
  EXPECT_GE(size, 26'000'000u) << "1000 s at 1000 Hz, 26 bytes a row";
  EXPECT_GE(onDisk(path_), size);
  append(**recorder, 0, 2500);
  ASSERT_TRUE((*recorder)->event("mark", kStart, "a mark").has_value());
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());
  EXPECT_EQ(std::filesystem::file_size(path_), size) << "never cut";
  EXPECT_LT(onDisk(path_), size / 10);
  auto reader = Reader::open(path_);
  ASSERT_TRUE(reader.has_value());
  ASSERT_EQ((*reader)->rows(0), 2500u);
  auto rows = (*reader)->read(0, 0, 2500);
  ASSERT_TRUE(rows.has_value());
  for (std::uint64_t r = 0; r < 2500; ++r) ASSERT_EQ(rows->ratio[2 * r], ratioOf(r, 0));
  EXPECT_EQ((*reader)->events().at(0).text, "a mark");
}

TEST_F(PartsAndRoom, aDiskWithoutRoomIsSaidAtTheStartWithFigures) {
  auto recorder = Recorder::create(path_, plan(1e12));
  ASSERT_FALSE(recorder.has_value());
  EXPECT_EQ(recorder.error().code, ErrorCode::io);
  EXPECT_NE(recorder.error().message.find("one file takes 26000000001.0 MB"), std::string::npos)
      << recorder.error().text();
  EXPECT_NE(recorder.error().message.find(", free are "), std::string::npos) << recorder.error().text();
  EXPECT_FALSE(std::filesystem::exists(path_));
}

TEST_F(PartsAndRoom, aFileSystemInMemoryWillDo) {
  const std::string path = "/dev/shm/shuntwright-" + std::to_string(::getpid()) + ".h5";
  if (::access("/dev/shm", W_OK) != 0) GTEST_SKIP() << "no /dev/shm";
  auto recorder = Recorder::create(path, plan(10));
  ASSERT_TRUE(recorder.has_value()) << recorder.error().text();
  append(**recorder, 0, 500);
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());
  auto reader = Reader::open(path);
  ::unlink(path.c_str());
  ASSERT_TRUE(reader.has_value());
  EXPECT_EQ((*reader)->rows(0), 500u);
}

TEST_F(PartsAndRoom, aFailingDeviceFillsNeitherTheStoreNorTheOperatorsShareOfIt) {
  auto small = plan(100);
  small.eventBytes = 16384;
  auto recorder = Recorder::create(path_, small);
  ASSERT_TRUE(recorder.has_value());
  // One frame of ten is lost, a hundred times a second, for 20 s.
  for (std::uint64_t from = 0; from < 20000; from += 10) append(**recorder, from, 9, 1);
  while ((*recorder)->event("fault", kStart, "away").has_value()) continue;
  for (int k = 0; k < 20; ++k) ASSERT_TRUE((*recorder)->event("mark", kStart, "mark").has_value()) << k;
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());
  auto reader = Reader::open(path_);
  ASSERT_TRUE(reader.has_value());
  int lines = 0, marks = 0;
  std::uint64_t lost = 0;
  for (const auto& event : (*reader)->events()) {
    if (event.kind == "mark") ++marks;
    if (event.kind != "lost") continue;
    ++lines;
    lost += event.count;
  }
  EXPECT_EQ(lost, 2000u) << "to the frame";
  EXPECT_EQ((*reader)->lost(0), 2000u);
  EXPECT_GE(lines, 2);
  EXPECT_LE(lines, 21) << "one a second at most, and the end";
  EXPECT_EQ(marks, 20);
}

TEST_F(PartsAndRoom, rawRatiosOfTheTableAreThoseOfTheFile) {
  auto recorder = Recorder::create(path_, plan(10));
  ASSERT_TRUE(recorder.has_value());
  append(**recorder, 0, 1000);
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());
  auto parts = openParts(path_);
  std::stringstream out;
  CsvOptions options;
  options.raw = true;
  ASSERT_TRUE(writeCsv(*parts, options, out).has_value());
  std::string line, field;
  std::getline(out, line);
  for (std::uint64_t row = 0; row < 1000; ++row) {
    std::getline(out, line);
    std::stringstream fields(line);
    for (int k = 0; k < 5; ++k) std::getline(fields, field, ',');
    // Single precision where the value was made, double where it is read: the same number to half a digit of
    // nine.
    EXPECT_NEAR(std::stod(field) / 1e3, static_cast<double>(ratioOf(row, 0)),
                5e-9 * std::abs(static_cast<double>(ratioOf(row, 0))));
    EXPECT_EQ(static_cast<float>(std::stod(field) / 1e3), ratioOf(row, 0)) << field;
  }
}

TEST_F(PartsAndRoom, textThatIsNoUtf8StaysReadable) {
  auto recorder = Recorder::create(path_, plan(10));
  ASSERT_TRUE((*recorder)->event("mark", kStart, "50 \xB5m").has_value());
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());
  auto reader = Reader::open(path_);
  ASSERT_EQ((*reader)->events().size(), 1u);
  EXPECT_EQ((*reader)->events()[0].text, "50 \xEF\xBF\xBDm");
  EXPECT_EQ(python("import sys,h5py,json\nf=h5py.File(sys.argv[1],\"r\")\n"
                   "print(json.loads(bytes(f[\"events\"][:int(f[\"events_bytes\"][0])]).decode())[\"text\"]=="
                   "\"50 \\ufffdm\")",
                   path_),
            "True\n");
}

// RFC 3629, section 4 (syntax of UTF-8 byte sequences); overlong forms, surrogates and what lies beyond
// U+10FFFF are none.
TEST(ValidUtf8, keepsCharactersAndReplacesEveryOtherByte) {
  const std::string bad = "\xEF\xBF\xBD";
  for (const char* good :
       {"", "plain", "\xC2\xB5\xCE\xB5", "\xE2\x82\xAC", "\xED\x9F\xBF", "\xF4\x8F\xBF\xBF"}) {
    EXPECT_EQ(validUtf8(good), good);
  }
  EXPECT_EQ(validUtf8("\xC0\xAF"), bad + bad);
  EXPECT_EQ(validUtf8("\xED\xA0\x80"), bad + bad + bad);
  EXPECT_EQ(validUtf8("\xF4\x90\x80\x80"), bad + bad + bad + bad);
  EXPECT_EQ(validUtf8("\xE2\x82x"), bad + bad + "x");
  EXPECT_EQ(validUtf8("a\xFF"), "a" + bad);
}

}  // namespace
}  // namespace shuntwright::recording
