#include "driver/description/text_template.h"

#include <gtest/gtest.h>

#include "driver/description/diagnostics.h"

namespace {

using namespace shuntwright;
using namespace shuntwright::description;
using Kind = Segment::Kind;

TextTemplate parse(const std::string& text, const std::vector<std::string_view>& allowed, Diagnostics& d) {
  return parseTemplate(text, Place{"p.toml", 3, 7}, allowed, d);
}

TEST(Template, splitsIntoLiteralsAndFields) {
  Diagnostics d;
  const TextTemplate t =
      parse("@{counter:04X} {a},{b:3}{{x}} {values:; }!", {"counter", "a", "b", "values"}, d);
  ASSERT_TRUE(d.ok()) << d.render(false);
  struct Want {
    Kind kind;
    const char* text;
    int width;
    const char* separator;
  };
  const Want want[] = {
      {Kind::literal, "@", 0, ""},    {Kind::hex_upper, "counter", 4, ""}, {Kind::literal, " ", 0, ""},
      {Kind::text, "a", 0, ""},       {Kind::literal, ",", 0, ""},         {Kind::decimal, "b", 3, ""},
      {Kind::literal, "{x} ", 0, ""}, {Kind::list, "values", 0, "; "},     {Kind::literal, "!", 0, ""}};
  ASSERT_EQ(t.segments.size(), std::size(want));
  for (std::size_t i = 0; i < std::size(want); ++i) {
    EXPECT_EQ(t.segments[i].kind, want[i].kind) << i;
    EXPECT_EQ(t.segments[i].text, want[i].text) << i;
    EXPECT_EQ(t.segments[i].width, want[i].width) << i;
    EXPECT_EQ(t.segments[i].separator, want[i].separator) << i;
  }
  EXPECT_TRUE(t.hasField("values"));
  EXPECT_FALSE(t.hasField("@"));
  EXPECT_FALSE(t.hasField("x"));
}

TEST(Template, reportsEveryMistakeWithARemedy) {
  struct Case {
    const char* text;
    const char* message;
    const char* remedy;
  };
  const Case cases[] = {
      {"CLOSE {realy}", "unknown field {realy} in \"CLOSE {realy}\"", "did you mean \"relay\"?"},
      {"CLOSE {", "\"CLOSE {\" has an unmatched \"{\"", "write \"{{\" for the brace itself"},
      {"CLOSE }", "\"CLOSE }\" has an unmatched \"}\"", "write \"}}\" for the brace itself"},
      {"{values}", "{values} in \"{values}\" cannot be read", "a list needs its separator: {values:,}"},
      {"{values:}", "{values:} in \"{values:}\" cannot be read", "a list needs its separator: {values:,}"},
      {"{relay:0.2}", "{relay:0.2} in \"{relay:0.2}\" cannot be read",
       "the format of a number is its width, up to 20, padded with zeros, and x or X for hexadecimal: "
       "{relay:02} or "
       "{relay:08X}"},
      {"{relay:99}", "{relay:99} in \"{relay:99}\" cannot be read",
       "the format of a number is its width, up to 20, padded with zeros, and x or X for hexadecimal: "
       "{relay:02} or "
       "{relay:08X}"},
      {"{relay:-2}", "{relay:-2} in \"{relay:-2}\" cannot be read",
       "the format of a number is its width, up to 20, padded with zeros, and x or X for hexadecimal: "
       "{relay:02} or "
       "{relay:08X}"},
  };
  for (const Case& c : cases) {
    Diagnostics d;
    parse(c.text, {"relay", "values"}, d);
    ASSERT_EQ(d.problems().size(), 1u) << c.text;
    EXPECT_EQ(d.problems()[0].message, c.message);
    EXPECT_EQ(d.problems()[0].remedy, c.remedy);
    EXPECT_EQ(d.problems()[0].place, (Place{"p.toml", 3, 7}));
  }
}

}  // namespace
