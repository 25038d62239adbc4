// proves P-04
#include "driver/protocol/line_splitter.h"

#include <gtest/gtest.h>

#include "split.h"

namespace shuntwright::protocol {
namespace {

using Lines = std::vector<std::string>;

struct Split {
  Lines lines;
  std::vector<std::size_t> dropped;
  std::string partial;
};

Split splitPieces(const std::vector<std::string>& pieces, const std::string& terminator,
                  std::size_t longest = 100) {
  LineSplitter splitter(terminator, longest);
  Split out;
  for (const auto& piece : pieces) {
    splitter.feed(bytesOf(piece), [&](const LineSplitter::Line& line) {
      out.lines.emplace_back(line.text);
      out.dropped.push_back(line.droppedBytes);
    });
  }
  out.partial = std::string(splitter.partial());
  return out;
}

TEST(LineSplitter, GivesTheSameLinesHoweverTheBytesAreCut) {
  for (const std::string terminator : {"\n", "\r\n", "\r", ">> ", "abab"}) {
    const std::string bytes = "one" + terminator + terminator + "three and more" + terminator + "rest";
    test::everySplit(bytes, [&](const std::vector<std::string>& pieces) {
      const Split split = splitPieces(pieces, terminator);
      ASSERT_EQ(split.lines, (Lines{"one", "", "three and more"})) << terminator;
      ASSERT_EQ(split.partial, "rest");
    });
  }
}

TEST(LineSplitter, AHalfTerminatorIsPartOfTheLine) {
  test::everySplit("a\rb\r\r\nc\n\r\n", [](const std::vector<std::string>& pieces) {
    ASSERT_EQ(splitPieces(pieces, "\r\n").lines, (Lines{"a\rb\r", "c\n"}));
  });
}

TEST(LineSplitter, AnOverlongLineIsReportedAndTheNextOneIsRead) {
  for (const std::string terminator : {"\n", "\r\n", "abab"}) {
    const std::string bytes =
        std::string(25, 'x') + terminator + "next" + terminator + std::string(10, 'y') + terminator;
    test::everySplit(bytes, [&](const std::vector<std::string>& pieces) {
      const Split split = splitPieces(pieces, terminator, 10);
      ASSERT_EQ(split.lines, (Lines{std::string(10, 'x'), "next", std::string(10, 'y')}));
      ASSERT_EQ(split.dropped, (std::vector<std::size_t>{15, 0, 0}));
    });
  }
}

TEST(LineSplitter, ALineWithoutEndTakesNoMoreRoomThanTheLongest) {
  LineSplitter splitter("\r\n", 50);
  const std::string piece(1000, 'x');
  for (int k = 0; k < 100; ++k) splitter.feed(bytesOf(piece), [](const auto&) { FAIL(); });
  EXPECT_LE(splitter.partial().size(), 51u);
  std::size_t dropped = 0;
  splitter.feed(bytesOf("\r\nok\r\n"), [&](const LineSplitter::Line& line) { dropped += line.droppedBytes; });
  EXPECT_EQ(dropped, 100'000u - 50);
}

TEST(LineSplitter, ABegunLineCanBeGivenUp) {
  LineSplitter splitter("\n", 50);
  Lines lines;
  const auto keep = [&](const LineSplitter::Line& line) { lines.emplace_back(line.text); };
  splitter.feed(bytesOf("half"), keep);
  EXPECT_EQ(splitter.dropPartial(), 4u);
  splitter.feed(bytesOf("whole\n"), keep);
  EXPECT_EQ(lines, Lines{"whole"});
  EXPECT_EQ(splitter.dropPartial(), 0u);
}

}  // namespace
}  // namespace shuntwright::protocol
