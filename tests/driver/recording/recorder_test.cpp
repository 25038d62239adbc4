// proves P-09
#include "driver/recording/recorder.h"

#include <gtest/gtest.h>
#include <sys/mman.h>
#include <sys/resource.h>
#include <sys/wait.h>
#include <unistd.h>

#include <cmath>
#include <csignal>
#include <cstdio>
#include <cstdlib>
#include <ctime>
#include <filesystem>
#include <fstream>
#include <sstream>

#include "driver/core/random.h"
#include "driver/recording/csv.h"
#include "driver/recording/load_steps.h"
#include "driver/recording/reader.h"
#include "tests/driver/recording/recorder_fixture.h"

namespace shuntwright::recording {
namespace {

TEST_F(RecorderTest, whatWasRecordedReadsBack) {
  auto recorder = Recorder::create(path_, plan(10));
  ASSERT_TRUE(recorder.has_value()) << recorder.error().text();
  append(**recorder, 0, 700);
  append(**recorder, 700, 1800, 5);
  ASSERT_TRUE((*recorder)->event("mark", kStart, "caf\xC3\xA9 \"quoted\"").has_value());
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());
  auto reader = Reader::open(path_);
  ASSERT_TRUE(reader.has_value()) << reader.error().text();
  EXPECT_TRUE((*reader)->complete());
  ASSERT_EQ((*reader)->rows(0), 2500u);
  EXPECT_EQ((*reader)->lost(0), 5u);
  ASSERT_EQ((*reader)->events().size(), 2u);
  EXPECT_EQ((*reader)->events()[0].kind, "lost");
  EXPECT_EQ((*reader)->events()[0].count, 5u);
  EXPECT_EQ((*reader)->events()[1].text, "caf\xC3\xA9 \"quoted\"");
  auto rows = (*reader)->read(0, 0, 2500);
  ASSERT_TRUE(rows.has_value()) << rows.error().text();
  for (std::uint64_t r = 0; r < 2500; ++r) {
    ASSERT_EQ(rows->ratio[2 * r], ratioOf(r, 0));
    ASSERT_EQ(rows->ratio[2 * r + 1], ratioOf(r, 2)) << "the input between has no channel";
    ASSERT_EQ(rows->corrected[2 * r], 2 * ratioOf(r, 0));
  }
  EXPECT_FALSE((*reader)->read(0, 2400, 101).has_value());
}

TEST_F(RecorderTest, nothingIsEverOverwritten) {
  ASSERT_TRUE(Recorder::create(path_, plan(1)).has_value());
  auto again = Recorder::create(path_, plan(1));
  ASSERT_FALSE(again.has_value());
  EXPECT_EQ(again.error().code, ErrorCode::refused);
}

TEST_F(RecorderTest, aLaterPartOfAnOlderRecordingIsFoundOutAtTheStart) {
  std::ofstream(partPath(path_, 2)) << "an older recording's";
  auto recorder = Recorder::create(path_, plan(1));
  ASSERT_FALSE(recorder.has_value());
  EXPECT_EQ(recorder.error().code, ErrorCode::refused);
  EXPECT_NE(recorder.error().where.find("-0002"), std::string::npos) << recorder.error().text();
}

TEST_F(RecorderTest, aFullFileRollsOverAndNoRowIsLost) {
  auto recorder = Recorder::create(path_, plan(0.5));
  ASSERT_TRUE(recorder.has_value());
  for (std::uint64_t at = 0; at < 2000; at += 250) append(**recorder, at, 250);
  EXPECT_EQ((*recorder)->rows(0), 2000u);
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());
  std::uint64_t next = 0;
  for (int part = 1; next < 2000; ++part) {
    auto reader = Reader::open(partPath(path_, part));
    ASSERT_TRUE(reader.has_value()) << reader.error().text();
    EXPECT_EQ((*reader)->part(), part);
    auto rows = (*reader)->read(0, 0, (*reader)->rows(0));
    for (std::size_t r = 0; r < rows->time.size(); ++r) ASSERT_EQ(rows->ratio[2 * r], ratioOf(next++, 0));
  }
  EXPECT_EQ(next, 2000u);
}

TEST_F(RecorderTest, aFullDiskIsSaidAndWhatWasCommittedStays) {
  auto recorder = Recorder::create(path_, plan(100));
  ASSERT_TRUE(recorder.has_value());
  append(**recorder, 0, 1000);
  ASSERT_TRUE((*recorder)->commit(kStart).has_value());
  // A file-size limit below the file's end stands in for a full disk: writes beyond it fail with EFBIG.
  struct rlimit before {};
  ::getrlimit(RLIMIT_FSIZE, &before);
  struct rlimit small = before;
  small.rlim_cur = 4096;
  std::signal(SIGXFSZ, SIG_IGN);
  ::setrlimit(RLIMIT_FSIZE, &small);
  auto b = block(1000, 2000);
  auto failed = (*recorder)->append(0, b, corrected(b), b.time.back());
  ::setrlimit(RLIMIT_FSIZE, &before);
  ASSERT_FALSE(failed.has_value());
  EXPECT_EQ(failed.error().code, ErrorCode::io);
  EXPECT_NE(failed.error().remedy.find("committed before is whole"), std::string::npos);
  recorder->reset();
  auto reader = Reader::open(path_);
  ASSERT_TRUE(reader.has_value());
  EXPECT_FALSE((*reader)->complete());
  EXPECT_GE((*reader)->rows(0), 1000u);
}

TEST_F(RecorderTest, loadStepsAreMeansOverHoldsWithoutFlaggedSamples) {
  auto recorder = Recorder::create(path_, plan(10));
  ASSERT_TRUE(recorder.has_value());
  append(**recorder, 0, 2000);
  const auto at = [](double s) { return kStart + fromSeconds(s); };
  ASSERT_TRUE((*recorder)->event(kStepBegin, at(0.1), "50 %").has_value());
  ASSERT_TRUE((*recorder)->event(kStepEnd, at(0.2), "").has_value());
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());
  auto parts = openParts(path_);
  auto steps = loadSteps(*parts);
  ASSERT_TRUE(steps.has_value());
  ASSERT_EQ(steps->size(), 1u);
  const auto& mean = (*steps)[0].channels[0];
  // Rows 100 to 200 without 100, 150 and 200, which are flagged.
  double sum = 0;
  int n = 0;
  for (std::uint64_t r = 100; r <= 200; ++r) {
    if (r % 50 == 0) continue;
    sum += 2.0 * static_cast<double>(ratioOf(r, 0));
    ++n;
  }
  EXPECT_EQ(mean.samples, static_cast<std::uint64_t>(n));
  EXPECT_NEAR(mean.mean, sum / n, 1e-12);
}

// RFC 4180, read by Python's csv module, which follows it.
TEST_F(RecorderTest, csvIsWhatAnotherReaderOfRfc4180Expects) {
  auto recorder = Recorder::create(path_, plan(10));
  append(**recorder, 0, 3);
  ASSERT_TRUE((*recorder)->finish(kStart).has_value());
  auto parts = openParts(path_);
  {
    std::ofstream out(folder_ + "/run.csv", std::ios::binary);
    CsvOptions options;
    options.raw = true;
    ASSERT_TRUE(writeCsv(*parts, options, out).has_value());
  }
  const std::string out = python(
      "import csv,sys\nd=open(sys.argv[1],newline=\"\").read()\nassert d.count(\"\\r\\n\")==4 and "
      "d.endswith(\"\\r\\n\")\n"
      "r=list(csv.reader(d.splitlines()))\nassert len({len(x) for x in "
      "r})==1\nprint(r[0][3]);print(r[2][1]);print(float(r[2][2]))",
      folder_ + "/run.csv");
  EXPECT_EQ(out, "S, \"2\" [kN]\n0.001\n2e-08\n");
}

/// What the writing child tells its parent, in shared memory.
struct Shared {
  volatile std::uint64_t appended;
  volatile std::int64_t ready;
};

std::int64_t monotonic_ns() {
  timespec now{};
  ::clock_gettime(CLOCK_MONOTONIC, &now);
  return now.tv_sec * 1'000'000'000 + now.tv_nsec;
}

/// Records as fast as real time allows until it is killed; stamps each row with the monotonic clock.
[[noreturn]] void recordUntilKilled(const std::string& path, Shared* shared) {
  auto recorder = Recorder::create(path, plan(60));
  if (!recorder) ::_exit(1);
  shared->ready = 1;
  std::uint64_t row = 0;
  for (;;) {
    auto b = block(row, 20);
    const Instant now{Nanoseconds(monotonic_ns())};
    for (auto& t : b.time) t = now;
    if (!(*recorder)->append(0, b, corrected(b), now)) ::_exit(2);
    row += 20;
    shared->appended = row;
    ::usleep(1000);
  }
}

using RecorderSlow = RecorderTest;

TEST_F(RecorderSlow, aFileKilledAtAnyMomentOpensAndLacksAtMostTheLastSecond) {
  constexpr int kKills = 50;
  Random random(2026);
  auto* shared = static_cast<Shared*>(
      ::mmap(nullptr, sizeof(Shared), PROT_READ | PROT_WRITE, MAP_SHARED | MAP_ANONYMOUS, -1, 0));
  std::ofstream list(folder_ + "/list");
  for (int k = 0; k < kKills; ++k) {
    const std::string path = folder_ + "/kill" + std::to_string(k) + ".h5";
    shared->ready = 0;
    const pid_t child = ::fork();
    if (child == 0) recordUntilKilled(path, shared);
    while (shared->ready == 0) ::usleep(200);
    ::usleep(static_cast<useconds_t>(random.uniform(1000, 900000)));
    ::kill(child, SIGKILL);
    const std::int64_t killed = monotonic_ns();
    int status = 0;
    ::waitpid(child, &status, 0);
    ASSERT_TRUE(WIFSIGNALED(status)) << "the child ended by itself: " << WEXITSTATUS(status);
    list << path << ' ' << killed << '\n';
    // Our own reader.
    auto reader = Reader::open(path);
    ASSERT_TRUE(reader.has_value()) << reader.error().text();
    EXPECT_FALSE((*reader)->complete());
    EXPECT_LE((*reader)->rows(0), shared->appended);
  }
  list.close();
  // Plain h5py, one process for all; no repair, nothing but the row counter.
  const std::string out = python(
      "import sys,h5py,numpy as np\nworst=0\nfor line in open(sys.argv[1]):\n"
      " p,killed=line.split()\n f=h5py.File(p,\"r\")\n d=f[\"devices/amp1\"]\n n=int(d[\"rows\"][0])\n"
      " i=np.arange(n)\n"
      " w=(i%100000).astype(np.float32)*np.float32(1e-8)\n"
      " assert np.array_equal(d[\"ratio\"][:n,0],w), p\n"
      " assert np.array_equal(d[\"corrected\"][:n,0],2*w), p\n"
      " last=d[\"time\"][n-1] if n else None\n"
      " worst=max(worst,(int(killed)-int(last))/1e9) if n else worst\n"
      " assert bytes(f[\"ended\"][:4])==b\"open\"\nprint(\"ok\" if worst<1 else worst)",
      folder_ + "/list");
  EXPECT_EQ(out, "ok\n");
  // And h5dump.
  for (int k = 0; k < kKills; k += 10) {
    const std::string command = "h5dump -H " + folder_ + "/kill" + std::to_string(k) + ".h5 > /dev/null 2>&1";
    EXPECT_EQ(std::system(command.c_str()), 0);
  }
  ::munmap(shared, sizeof(Shared));
}

TEST_F(RecorderTest, aLiveFileOpensInPlainH5py) {
  auto recorder = Recorder::create(path_, plan(10));
  append(**recorder, 0, 1500);
  ASSERT_TRUE((*recorder)->commit(kStart).has_value());
  EXPECT_EQ(python("import sys,h5py\nf=h5py.File(sys.argv[1],\"r\")\nprint(int(f[\"devices/amp1/rows\"][0]))",
                   path_),
            "1500\n");
}

TEST(PartPath, putsTheNumberBeforeTheEnding) {
  EXPECT_EQ(partPath("a/run.h5", 1), "a/run.h5");
  EXPECT_EQ(partPath("a/run.h5", 2), "a/run-0002.h5");
  EXPECT_EQ(partPath("a.b/run", 3), "a.b/run-0003");
}

}  // namespace
}  // namespace shuntwright::recording
