// proves P-03
#include "driver/description/toml_reader.h"

#include <gtest/gtest.h>

#include "tests/driver/description/sample.h"

namespace {

using namespace shuntwright;
using namespace shuntwright::description;

std::vector<std::string> syntax(const std::string& text) {
  Diagnostics d;
  const bool read = parseToml(text, "b/rack.toml", d).has_value();
  EXPECT_EQ(read, d.problems().empty());
  return sample::lines(d);
}

TEST(ParseToml, keepsPlacesAndTheOrderOfTheFile) {
  Diagnostics d;
  const auto root = parseToml("zeta = 1\nalpha = [ 'x',\n  true ]\n[[t]]\n  k = 2.5\n", "f", d);
  ASSERT_TRUE(root) << d.render(false);
  ASSERT_EQ(root->entries.size(), 3u);
  EXPECT_EQ(root->entries[0].key, "zeta");
  EXPECT_EQ(root->entries[0].place, (Place{"f", 1, 1}));
  EXPECT_EQ(root->entries[0].value.place, (Place{"f", 1, 8}));
  EXPECT_EQ(root->entries[1].value.items[1].place, (Place{"f", 3, 3}));
  EXPECT_EQ(root->entries[2].value.items[0].place, (Place{"f", 4, 1}));
  EXPECT_EQ(root->entries[2].value.items[0].find("k")->value.number, 2.5);
}

TEST(ParseToml, countsColumnsInCodePoints) {
  Diagnostics d;
  const auto root = parseToml("a = { b = \"\u03A9\u68AF\", c = 1 }", "f", d);
  ASSERT_TRUE(root);
  EXPECT_EQ(root->find("a")->value.find("c")->place, (Place{"f", 1, 17}));
}

TEST(ParseToml, reportsASyntaxErrorAloneWithItsPlace) {
  const char* const remedy = " | mend this first; the rest of the file is checked after that";
  struct Case {
    const char* text;
    const char* problem;
  };
  const Case cases[] = {
      {"a = 1\na = 2\nb = 120 ohm\n",
       "2:5: syntax: Error while parsing key-value pair: cannot redefine existing integer 'a'"},
      {"\n\nx = 120 ohm\n",
       "3:9: syntax: Error while parsing key-value pair: expected a comment or whitespace, saw 'o'"},
      {"a = [1,\n2", "2:2: syntax: Error while parsing array: encountered end-of-file"},
  };
  for (const Case& c : cases)
    EXPECT_EQ(syntax(c.text), std::vector<std::string>{std::string(c.problem) + remedy});
}

// Found by fuzzing the parser: these stop a program (assertion, undefined behaviour, stack overflow).
TEST(ParseToml, survivesWhatStopsTheParserItself) {
  EXPECT_EQ(syntax("[ \n \n [").size(), 1u);
  const char* const ascii =
      "a character that is not ASCII stands outside strings and comments | put it in double "
      "quotes, or write it with plain letters";
  EXPECT_EQ(syntax("a = 1 # \u03A9\nb = \"\u03A9\"\n\uFC7F = 1"),
            std::vector<std::string>{"3:1: " + std::string(ascii)});
  EXPECT_EQ(syntax("a = \u00B5"), std::vector<std::string>{"1:5: " + std::string(ascii)});
  std::string deep = "a";
  for (int i = 0; i < 100000; ++i) deep += ".a";
  EXPECT_EQ(syntax(deep + " = 1"),
            std::vector<std::string>{"1:34: a key is nested too deep | at most 16 parts joined by dots"});
  EXPECT_EQ(syntax(std::string(100000, '[')).size(), 1u);
  EXPECT_EQ(syntax("a = " + std::string(100000, '[')).size(), 1u);
  std::string tables = "a = ";
  for (int i = 0; i < 100000; ++i) tables += "{a=";
  EXPECT_EQ(syntax(tables),
            std::vector<std::string>{"1:101: brackets are nested too deep | at most 32 within each other"});
  // As deep as both limits together let it: must be read or refused, not overflow the stack.
  std::string both = "a = ", closing;
  for (int i = 0; i < 32; ++i) both += "{a.a.a.a.a.a.a.a.a.a.a.a.a.a.a.a = ", closing += "}";
  EXPECT_EQ(syntax(both + "1" + closing), std::vector<std::string>{});
  EXPECT_EQ(syntax(std::string(5u << 20, ' ')),
            std::vector<std::string>{"0:0: the file is longer than 4 MiB | split it"});
}

TEST(ParseToml, allowsNonAsciiInEveryKindOfStringAndComment) {
  for (const char* text :
       {"a = \"\u03A9\"", "a = '\u03A9'", "a = \"\"\"\n\u03A9 \\\" \"\" \u03A9\"\"\"\nb = 1",
        "a = '''\n\u03A9 '' \u03A9'''", "a = \"\\\"\u03A9\"", "# \u03A9 ' \" \na = 1", "\"\u03A9\" = 1",
        "\xEF\xBB\xBF"
        "a = 1",
        "a = [0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1.0, 1.1, 1.2, 1.3, 1.4, 1.5, 1.6, 1.7, 1.8]"})
    EXPECT_EQ(syntax(text), std::vector<std::string>{}) << text;
}

TEST(TableReader, readsEveryKindOfValue) {
  Diagnostics d;
  const auto root = parseToml(R"(text = "x"
flag = true
count = 3
number = 2
ohms = "120 ohm"
wait = "5 ms"
warm = "22 degC"
factor = 2.1
list = ["1 V", "2 V"]
word = "two"
maybe = 7
)",
                              "f", d);
  ASSERT_TRUE(root);
  TableReader r(*root, "the test", d);
  std::string text;
  bool flag = false;
  int count = 0;
  double number = 0;
  units::Resistance ohms;
  Nanoseconds wait{};
  units::Temperature warm;
  units::GaugeFactor factor;
  std::vector<units::Voltage> list;
  int word = 0;
  std::optional<int> maybe, absent;
  EXPECT_TRUE(r.need("text", text) && r.need("flag", flag) && r.need("count", count, {"1", "3"}) &&
              r.need("number", number) && r.need("ohms", ohms, {"120 ohm", "120 ohm"}) &&
              r.need("wait", wait) && r.need("warm", warm) && r.need("factor", factor) &&
              r.takeList("list", list) && r.take("maybe", maybe) &&
              r.choose("word", word, {{"one", 1}, {"two", 2}}));
  EXPECT_FALSE(r.take("absent", absent));
  r.finish();
  EXPECT_TRUE(d.problems().empty()) << d.render(false);
  EXPECT_EQ(text, "x");
  EXPECT_TRUE(flag);
  EXPECT_EQ(count, 3);
  EXPECT_EQ(number, 2);
  EXPECT_EQ(ohms, 120.0 * units::ohm);
  EXPECT_EQ(wait, std::chrono::milliseconds(5));
  EXPECT_EQ(warm, units::Temperature::celsius(22));
  EXPECT_EQ(factor.value(), 2.1);
  ASSERT_EQ(list.size(), 2u);
  EXPECT_EQ(list[1], 2.0 * units::volt);
  EXPECT_EQ(word, 2);
  EXPECT_EQ(maybe, 7);
  EXPECT_EQ(absent, std::nullopt);
}

TEST(TableReader, reportsWrongTypesRangesAndKeys) {
  Diagnostics d;
  const auto root = parseToml(R"(text = 1
flag = "true"
count = 2.5
big = 5000000000
number = inf
ohms = 120
high = "2 Mohm"
list = ["1 V", 2]
word = "tow"
misc = 1
[[table]]
[tables]
)",
                              "b/rack.toml", d);
  ASSERT_TRUE(root);
  TableReader r(*root, "the test", d);
  std::string text = "kept";
  bool flag = false;
  int count = 9;
  double number = 9;
  units::Resistance ohms = 9.0 * units::ohm;
  std::vector<units::Voltage> list;
  int word = 9;
  r.need("text", text);
  r.need("flag", flag);
  r.need("count", count);
  r.need("big", count);
  r.need("number", number);
  r.need("ohms", ohms);
  r.need("high", ohms, {"1 ohm", "1 Mohm"});
  r.takeList("list", list);
  r.choose("word", word, {{"one", 1}, {"two", 2}});
  r.need("mist", text, {}, "\"x\"");
  r.table("table");
  r.tables("tables");
  r.finish();
  EXPECT_EQ(sample::lines(d),
            (std::vector<std::string>{
                "1:8: \"text\" must be a string, not a whole number | put it in double quotes",
                "2:8: \"flag\" must be true or false, not a string | write true or false without quotes",
                "3:9: \"count\" must be a whole number, not a number | write a whole number without quotes",
                "4:7: \"big\" is out of range: 5000000000 | it must be between -2147483648 and 2147483647",
                "5:10: \"number\" must be a finite number",
                "6:8: \"ohms\" needs a unit | write \"120 ohm\" if that is what it is",
                "7:8: \"high\" is out of range: \"2 Mohm\" | it must be between 1 ohm and 1 Mohm",
                "8:16: an item of \"list\" needs a unit | write \"2 V\" if that is what it is",
                "9:8: \"word\" cannot be \"tow\" | did you mean \"two\"?",
                "1:1: \"mist\" is missing from the test | add it: mist = \"x\"",
                "11:1: \"table\" must be a table, not an array",
                "12:1: \"tables\" is a list of tables | write [[tables]] with double brackets",
                "10:1: unknown key \"misc\" in the test | did you mean \"mist\"?",
            }));
  EXPECT_EQ(text, "kept");
  EXPECT_EQ(count, 9);
  EXPECT_EQ(number, 9);
  EXPECT_EQ(ohms, 9.0 * units::ohm);
  EXPECT_EQ(word, 9);
}

TEST(MergeDefaults, fillsTablesKeyByKeyAndMarksWhatItAdds) {
  Diagnostics d;
  auto root =
      parseToml("own = { a = 1, t = { x = 1 } }\ndefaults = { a = 2, b = 3, t = { x = 9, y = 4 } }", "f", d);
  ASSERT_TRUE(root);
  TomlNode own = root->find("own")->value;
  mergeDefaults(own, root->find("defaults")->value);
  EXPECT_EQ(own.find("a")->value.integer, 1);
  EXPECT_FALSE(own.find("a")->inherited);
  EXPECT_EQ(own.find("b")->value.integer, 3);
  EXPECT_TRUE(own.find("b")->inherited);
  EXPECT_EQ(own.find("t")->value.find("x")->value.integer, 1);
  EXPECT_EQ(own.find("t")->value.find("y")->value.integer, 4);
}

}  // namespace
