#include "driver/description/diagnostics.h"

#include <gtest/gtest.h>

namespace {

using namespace shuntwright;
using namespace shuntwright::description;

TEST(Render, printsPlaceLineCaretAndHelp) {
  Diagnostics d;
  d.keepText("rack.toml", "[rack]\ncolour = 1\n");
  d.error({"rack.toml", 2, 1}, "unknown key \"colour\"", "did you mean \"color\"?");
  EXPECT_EQ(d.render(false),
            "rack.toml:2:1: error: unknown key \"colour\"\n"
            "   2 | colour = 1\n"
            "     | ^\n"
            "  = help: did you mean \"color\"?\n");
}

TEST(Render, keepsTheCaretUnderTabsAndWideCharacters) {
  struct Case {
    const char* line;
    int column;
    const char* caretLine;
  };
  // Columns count code points; the blanks before the caret must take as many terminal columns.
  const Case cases[] = {
      {"\ta = 1", 2, "     | \t^\n"},
      {"a = \"\u03A9\", b = 1", 10, "     |          ^\n"},       // Greek: one column
      {"a = \"\u68AF\", b = 1", 10, "     |           ^\n"},      // CJK: two columns
      {"a = \"e\u0301\", b = 1", 11, "     |          ^\n"},      // combining: none
      {"a = \"\U0001F600\", b = 1", 10, "     |           ^\n"},  // pictograph: two
      {"ab", 3, "     |   ^\n"},                                  // just past the end
  };
  for (const Case& c : cases) {
    Diagnostics d;
    d.keepText("f", c.line);
    d.error({"f", 1, c.column}, "x");
    EXPECT_EQ(d.render(false),
              "f:1:" + std::to_string(c.column) + ": error: x\n   1 | " + c.line + "\n" + c.caretLine);
  }
}

TEST(Render, showsControlCharactersAsQuestionMarks) {
  Diagnostics d;
  d.keepText("f", "a\x1b[31m = 1\r\n");
  d.error({"f", 1, 3}, "x");
  EXPECT_EQ(d.render(false), "f:1:3: error: x\n   1 | a?[31m = 1\n     |   ^\n");
}

TEST(Render, leavesOutWhatIsNotKnown) {
  Diagnostics d;
  d.error({"missing.toml", 0, 0}, "the file cannot be read");
  d.warning({}, "odd");
  EXPECT_EQ(d.render(false), "missing.toml: error: the file cannot be read\nwarning: odd\n");
}

TEST(Render, coloursOnlyWhenAsked) {
  Diagnostics d;
  d.error({"f", 1, 1}, "x", "y");
  EXPECT_EQ(d.render(false).find('\x1b'), std::string::npos);
  EXPECT_NE(d.render(true).find("\x1b[1;31merror:\x1b[0m"), std::string::npos);
}

TEST(Diagnostics, warningsDoNotCountAsErrors) {
  Diagnostics d;
  d.warning({"f", 1, 1}, "x");
  EXPECT_TRUE(d.ok());
  d.error({"f", 1, 1}, "y");
  EXPECT_FALSE(d.ok());
}

TEST(Diagnostics, saysTheSameThingAtTheSamePlaceOnce) {
  Diagnostics d;
  d.error({"f", 1, 1}, "x");
  d.error({"f", 1, 1}, "x");
  d.error({"f", 2, 1}, "x");
  EXPECT_EQ(d.problems().size(), 2u);
}

TEST(Diagnostics, sortsByFileThenPlace) {
  Diagnostics d;
  d.keepText("rack", "");
  d.keepText("profile", "");
  d.error({"profile", 1, 1}, "c");
  d.error({"rack", 2, 5}, "b");
  d.error({"rack", 2, 1}, "a");
  d.sortByPlace();
  std::string order;
  for (const Problem& p : d.problems()) order += p.message;
  EXPECT_EQ(order, "abc");
}

TEST(Nearest, findsTheMisspeltWord) {
  const std::vector<std::string_view> words = {"gauge", "group", "excitation", "circuit", "rate"};
  EXPECT_EQ(nearest("guage", words), "gauge");  // two neighbours swapped
  EXPECT_EQ(nearest("gage", words), "gauge");   // one left out
  EXPECT_EQ(nearest("exitation", words), "excitation");
  EXPECT_EQ(nearest("excitaiton", words), "excitation");
  EXPECT_EQ(nearest("Circuit", words), "circuit");  // case
  EXPECT_EQ(nearest("rat", words), "rate");
}

TEST(Nearest, keepsQuietWhenNothingIsNear) {
  const std::vector<std::string_view> words = {"gauge", "group"};
  EXPECT_EQ(nearest("temperature", words), "");
  EXPECT_EQ(nearest("", words), "");
  EXPECT_EQ(nearest("gauge", {}), "");
  EXPECT_EQ(nearest(std::string(100000, 'g'), words), "");
  EXPECT_EQ(nearest("ab", {"cd"}), "");  // distance 2 of 2 letters
  EXPECT_EQ(nearest("ab", {"ad"}), "ad");
}

}  // namespace
