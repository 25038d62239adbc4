#include "driver/protocol/template_text.h"

#include <gtest/gtest.h>
#include <deque>
#include <limits>

#include "driver/description/diagnostics.h"

namespace shuntwright::protocol {
namespace {

/// Kept for the whole test: what is found points into it.
const description::TextTemplate& parsed(std::string source) {
  static std::deque<description::TextTemplate> kept;
  description::Diagnostics diagnostics;
  kept.push_back(description::parseTemplate(std::move(source), Place{"t.toml", 1, 1},
                                            {"a", "b", "relay", "mask", "rate", "values", "text", "code"},
                                            diagnostics));
  EXPECT_TRUE(diagnostics.ok()) << diagnostics.render(false);
  return kept.back();
}

std::string rendered(const std::string& source, std::vector<Value> values) {
  const auto out = render(parsed(source), values);
  return out ? *out : "error: " + out.error().message;
}

TEST(Render, FillsInNumbersAsTheFieldSays) {
  EXPECT_EQ(rendered("CLOSE {relay}", {{"relay", 3LL}}), "CLOSE 3");
  EXPECT_EQ(rendered("CLOSE {relay:02}", {{"relay", 3LL}}), "CLOSE 03");
  EXPECT_EQ(rendered("CLOSE {relay:02}", {{"relay", 123LL}}), "CLOSE 123");
  EXPECT_EQ(rendered("CLOSE {relay:04}", {{"relay", -3LL}}), "CLOSE -003");
  EXPECT_EQ(rendered("M {mask:08X}{mask:x}", {{"mask", 0xBEEFLL}}), "M 0000BEEFbeef");
  EXPECT_EQ(rendered("RATE {rate}", {{"rate", 100.0}}), "RATE 100");
  EXPECT_EQ(rendered("RATE {rate}", {{"rate", 2.5}}), "RATE 2.5");
  EXPECT_EQ(rendered("RATE {rate}", {{"rate", 1e-7}}), "RATE 0.0000001");
  EXPECT_EQ(rendered("{{{a}}}", {{"a", std::string_view("x")}}), "{x}");
}

TEST(Render, SaysWhichFieldHasNoSuitableValue) {
  EXPECT_EQ(rendered("CLOSE {relay}", {}), "error: no value for {relay} of \"CLOSE {relay}\"");
  EXPECT_EQ(rendered("M {mask:X}", {{"mask", -1LL}}), "error: {mask} takes numbers from 0 on, got -1");
  EXPECT_EQ(rendered("M {mask:X}", {{"mask", 1.5}}), "error: {mask} takes whole numbers, got 1.5");
  EXPECT_EQ(rendered("R {rate}", {{"rate", std::numeric_limits<double>::infinity()}}),
            "error: the value for {rate} is not a finite number");
}

TEST(Match, FindsFieldsBetweenLiterals) {
  Fields fields;
  ASSERT_TRUE(match(parsed("ID {a},{b};"), "ID POLL,16;", fields));
  EXPECT_EQ(fields["a"], "POLL");
  EXPECT_EQ(fields["b"], "16");
  EXPECT_EQ(fields["c"], "");
  EXPECT_EQ(fields.find("c"), nullptr);
}

TEST(Match, TakesTheShortestTextAndTheWholeLine) {
  Fields fields;
  ASSERT_TRUE(match(parsed("{a},{b}"), "1,2,3", fields));
  EXPECT_EQ(fields["a"], "1");
  EXPECT_EQ(fields["b"], "2,3");
  ASSERT_TRUE(match(parsed("{a}."), "1.5.", fields));
  EXPECT_EQ(fields["a"], "1.5") << "the last literal stands at the end of the line";
  EXPECT_FALSE(match(parsed("OK"), "OK ", fields));
  EXPECT_FALSE(match(parsed("OK"), " OK", fields));
  EXPECT_FALSE(match(parsed("OK"), "", fields));
  EXPECT_TRUE(match(parsed("OK{text}"), "OK", fields));
}

TEST(Match, NumberFieldsTakeDigitsOnly) {
  Fields fields;
  EXPECT_TRUE(match(parsed("#{relay:02} ok"), "#07 ok", fields));
  EXPECT_EQ(fields["relay"], "07");
  EXPECT_FALSE(match(parsed("#{relay:02} ok"), "#x7 ok", fields));
  EXPECT_FALSE(match(parsed("#{relay:02} ok"), "# ok", fields));
  EXPECT_TRUE(match(parsed("#{mask:04X}"), "#beef", fields));
  EXPECT_FALSE(match(parsed("#{mask:04X}"), "#beeg", fields));
}

TEST(Match, NeighbouringNumbersAreCutByTheirWidth) {
  Fields fields;
  ASSERT_TRUE(match(parsed("{a:02}{b:03}"), "12345", fields));
  EXPECT_EQ(fields["a"], "12");
  EXPECT_EQ(fields["b"], "345");
}

TEST(Match, ListsAreNotLookedInto) {
  Fields fields;
  ASSERT_TRUE(match(parsed("D {a:04X} {values:;}"), "D 00FF 1;2;x", fields));
  EXPECT_EQ(fields["values"], "1;2;x");
  EXPECT_EQ(fields.find("values")->segment->separator, ";");
}

TEST(Match, ReadsBackWhatIsRendered) {
  Fields fields;
  const auto& text = parsed("SET {relay:03}/{mask:X}");
  const std::vector<Value> values{{"relay", 7LL}, {"mask", 255LL}};
  const std::string line = *render(text, values);
  ASSERT_TRUE(match(text, line, fields));
  EXPECT_EQ(fields["relay"], "007");
  EXPECT_EQ(fields["mask"], "FF");
}

}  // namespace
}  // namespace shuntwright::protocol
