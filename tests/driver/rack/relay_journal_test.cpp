#include "driver/rack/relay_journal.h"

#include <gtest/gtest.h>

#include <cstdlib>
#include <filesystem>
#include <fstream>

namespace shuntwright::rack {
namespace {

using description::RelayRef;

class FileJournalTest : public ::testing::Test {
 protected:
  void SetUp() override {
    char pattern[] = "/tmp/shuntwright-journal-XXXXXX";
    folder_ = ::mkdtemp(pattern);
    path_ = folder_ + "/deep/rack.relays";
  }
  void TearDown() override { std::filesystem::remove_all(folder_); }

  std::unique_ptr<FileJournal> open() {
    auto journal = FileJournal::open(path_);
    EXPECT_TRUE(journal.has_value()) << journal.error().text();
    return std::move(*journal);
  }
  const Instant when_ = VirtualClock::kDefaultStart;
  std::string folder_, path_;
};

TEST_F(FileJournalTest, aRelayThatWasClosingIsUnresolvedForTheNextProcess) {
  {
    auto journal = open();
    ASSERT_TRUE(journal->closing(RelayRef{"relays1", 3}, when_));
    ASSERT_TRUE(journal->closing(RelayRef{"relays1", 4}, when_));
    ASSERT_TRUE(journal->opened(RelayRef{"relays1", 4}, when_));
  }
  EXPECT_EQ(open()->unresolved(), (std::set<RelayRef>{{"relays1", 3}}));
}

TEST_F(FileJournalTest, isEmptyWhenEveryRelayIsOpenAgain) {
  auto journal = open();
  ASSERT_TRUE(journal->closing(RelayRef{"relays1", 3}, when_));
  EXPECT_GT(std::filesystem::file_size(path_), 0u);
  ASSERT_TRUE(journal->opened(RelayRef{"relays1", 3}, when_));
  EXPECT_EQ(std::filesystem::file_size(path_), 0u);
}

TEST_F(FileJournalTest, aTornLastLineIsIgnoredSinceItsCommandHadNotGoneOut) {
  open();
  std::ofstream(path_) << "closing relays1/3 2026-05-04T09:30:00.000Z\nclosing relays1/";
  EXPECT_EQ(open()->unresolved(), (std::set<RelayRef>{{"relays1", 3}}));
}

TEST_F(FileJournalTest, aTornLineDoesNotSwallowTheNextOne) {
  open();
  std::ofstream(path_) << "closing relays1/3 2026-05-04T09:3";
  ASSERT_TRUE(open()->closing(RelayRef{"relays1", 4}, when_));
  EXPECT_TRUE(open()->unresolved().contains(RelayRef{"relays1", 4}));
}

TEST_F(FileJournalTest, saysSoWhenItCannotWrite) {
  auto journal = FileJournal::open("/proc/none/rack.relays");
  ASSERT_FALSE(journal.has_value());
  EXPECT_EQ(journal.error().code, ErrorCode::io);
  EXPECT_FALSE(journal.error().remedy.empty());
}

}  // namespace
}  // namespace shuntwright::rack
