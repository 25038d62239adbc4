// proves P-03
#include <gtest/gtest.h>

#include "tests/driver/description/sample.h"

namespace {

using namespace shuntwright;
using namespace shuntwright::description;
using Lines = std::vector<std::string>;

TEST(Profile, readsEveryField) {
  Diagnostics d;
  const auto profile = parseProfile(sample::kProfile, "p.toml", d);
  ASSERT_TRUE(profile) << d.render(false);
  EXPECT_EQ(profile->file, "p.toml");
  EXPECT_EQ(profile->text, sample::kProfile);
  EXPECT_EQ(profile->name, "sample");
  EXPECT_EQ(profile->title, "Sample device");
  EXPECT_EQ(profile->serial->baud, 9600);
  EXPECT_EQ(profile->tcp->port, 5025);

  EXPECT_EQ(profile->protocol.requestEnd, "\r\n");
  EXPECT_EQ(profile->protocol.answerEnd, "\n");
  EXPECT_FALSE(profile->protocol.echo);
  EXPECT_EQ(profile->protocol.checksum.kind, Checksum::Kind::xor8);
  EXPECT_EQ(profile->protocol.checksum.separator, "*");
  EXPECT_EQ(profile->protocol.timeout, std::chrono::milliseconds(250));
  EXPECT_EQ(profile->protocol.retries, 3);
  EXPECT_EQ(profile->protocol.gap, std::chrono::milliseconds(2));

  EXPECT_EQ(profile->identify->exchange.ask.source, "ID?");
  EXPECT_TRUE(profile->identify->exchange.answer->hasField("serial"));
  EXPECT_EQ(profile->identify->model, "SAMPLE");
  ASSERT_EQ(profile->errors.size(), 1u);
  EXPECT_TRUE(profile->errors[0].pattern.hasField("code"));

  const Inputs& inputs = profile->inputs.value();
  EXPECT_EQ(inputs.count, 4);
  EXPECT_EQ(inputs.first, 1);
  EXPECT_EQ(inputs.gives, ValueUnit::microvolt_per_volt);
  EXPECT_EQ(inputs.saturated, Lines{"OVR"});
  EXPECT_EQ(inputs.fullScale, 4.0 * units::millivolt_per_volt);
  ASSERT_EQ(inputs.completions.size(), 2u);
  EXPECT_EQ(inputs.completions[1].value, 350.0 * units::ohm);
  EXPECT_EQ(inputs.completions[1].tolerance, 0.1 * units::percent);
  EXPECT_EQ(inputs.halfBridge.value, 1.0 * units::kiloohm);
  EXPECT_EQ(inputs.excitations.size(), 2u);
  EXPECT_EQ(inputs.rates[1], 100.0 * units::hertz);
  EXPECT_EQ(inputs.filterTimeConstant, std::chrono::milliseconds(5));
  EXPECT_TRUE(inputs.streams());
  EXPECT_FALSE(inputs.read);
  EXPECT_EQ(inputs.streamStart->ask.source, "GO");
  EXPECT_FALSE(inputs.streamStart->answer);
  EXPECT_EQ(inputs.streamStop->answer->source, "OK");
  EXPECT_EQ(inputs.counterBits, 16);
  EXPECT_EQ(inputs.streamLine->place, (Place{"p.toml", 40, 8}));
  EXPECT_TRUE(inputs.setRate);
  EXPECT_FALSE(inputs.setExcitation);

  const Relays& relays = profile->relays.value();
  EXPECT_EQ(relays.count, 8);
  EXPECT_EQ(relays.operateTime, std::chrono::milliseconds(8));
  EXPECT_EQ(relays.releaseTime, std::chrono::milliseconds(10));  // the default
  EXPECT_EQ(relays.contactTolerance, 50.0 * units::milliohm);
  EXPECT_EQ(relays.close.ask.source, "CLOSE {relay:02}");
  EXPECT_EQ(relays.open.ask.source, "OPEN {relay:02}");
  EXPECT_EQ(relays.openAll->ask.source, "OPEN ALL");
  EXPECT_EQ(relays.state->ask.source, "STATE {relay}");
  EXPECT_EQ(relays.closedWord, "C");
  EXPECT_EQ(relays.openWord, "O");
}

TEST(Profile, reportsOneMistakeAtItsPlace) {
  struct Case {
    const char* from;
    const char* to;
    const char* problem;
  };
  const Case cases[] = {
      {"baud = 9600", "baudrate = 9600",
       "6:1: unknown key \"baudrate\" in [reach.serial] | known here: baud, data_bits, stop_bits, parity, "
       "flow"},
      {"baud = 9600", "buad = 9600", "6:1: unknown key \"buad\" in [reach.serial] | did you mean \"baud\"?"},
      {"baud = 9600", "parity = \"evn\"", "6:10: \"parity\" cannot be \"evn\" | did you mean \"even\"?"},
      {"port = 5025", "port = 70000",
       "8:8: \"port\" is out of range: 70000 | it must be between 1 and 65535"},
      {"answer_end = \"\\n\"", "answer_end = \"\"",
       "12:14: answer_end is empty | a line ends with one or more characters, for instance \"\\r\\n\""},
      {"\"xor8\"", "\"xor\"", "13:21: \"kind\" cannot be \"xor\" | did you mean \"xor8\"?"},
      {"\"250 ms\"", "250", "14:11: \"timeout\" needs a unit | write \"250 s\" if that is what it is"},
      {"\"250 ms\"", "\"250 msec\"",
       "14:11: \"timeout\": unknown unit \"msec\" for a duration | units of duration: s, ms, us, ns, min"},
      {"ID {model},{serial},{version}", "ID {model},{serail}",
       "20:10: unknown field {serail} in \"ID {model},{serail}\" | did you mean \"serial\"?"},
      {"ID {model},{serial},{version}", "ID {model}{serial}",
       "20:10: {model} and {serial} in \"ID {model}{serial}\" have nothing between them | put the separating "
       "text "
       "between them, or give the first a width"},
      {"ERR {code} {text}", "{text}",
       "24:11: this error pattern has no fixed text, so every answer is an error | write what error answers "
       "have in "
       "common: \"ERR {code}\""},
      {"gives = \"uV/V\"", "gives = \"mV\"",
       "28:9: \"gives\" cannot be \"mV\" | it must be \"V/V\", \"mV/V\" or \"uV/V\""},
      {"count = 4\n", "", "26:1: \"count\" is missing from [inputs] | add it: count = 16"},
      {"excitations = [\"2.5 V\", \"5 V\"]", "excitations = []",
       "33:15: \"excitations\" is empty | give at least one: excitations = [\"5 V\"]"},
      {"\"100 Hz\"]", "100]",
       "34:19: an item of \"rates\" needs a unit | write \"100 Hz\" if that is what it is"},
      {"start = \"GO\"\n", "", "37:1: \"start\" is missing from [inputs.stream] | add it: start = \"START\""},
      {"counter_bits = 16\n", "",
       "40:8: the line has a {counter}, but \"counter_bits\" is not given | add how many bits wide it is, "
       "that is after "
       "how many lines it wraps: counter_bits = 16"},
      {"@{counter:04X} {values:,}", "@{values:,}",
       "41:1: \"counter_bits\" is given, but the line has no {counter} | add {counter} to \"line\" or take "
       "\"counter_bits\" out"},
      {"@{counter:04X} {values:,}", "@{counter:04X} {skip}",
       "40:8: \"@{counter:04X} {skip}\" lacks the field {values} | put {values:,} where it stands"},
      {"RATE {rate}", "RATE", "44:7: \"RATE\" lacks the field {rate} | put {rate} where it stands"},
      {"contact_tolerance = \"50 mohm\"", "contact_tolerance = \"0.2 ohm\"",
       "52:21: the contact tolerance is larger than the contact resistance, which would go below 0 | give "
       "the middle "
       "of the range as \"contact_resistance\" and half its width as the tolerance"},
      {"CLOSE {relay:02}", "CLOSE 1",
       "56:7: \"CLOSE 1\" lacks the field {relay} | put {relay} where it stands"},
      {"CLOSE {relay:02}", "CLOSE {relay}{relay}",
       "56:7: the field {relay} stands twice in \"CLOSE {relay}{relay}\" | use {skip} for text that does not "
       "matter"},
      {"open = \"O\"", "open = \"C\"",
       "61:1: a closed and an open relay answer with the same word | give two different words as \"closed\" "
       "and "
       "\"open\""},
      {"answer = \"{state}\"", "answer = \"OK\"",
       "63:10: \"OK\" lacks the field {state} | put {state} where it stands"},
      {"[profile]", "[profil]",
       "1:1: this is no profile: it has no [profile] table | begin with [profile], name = \"...\" and title "
       "= \"...\""},
  };
  for (const Case& c : cases) {
    Lines got = sample::profileProblems(sample::spoilt(sample::kProfile, c.from, c.to));
    if (std::string(c.to) == "[profil]") {
      ASSERT_EQ(got.size(), 2u);
      EXPECT_EQ(got[1], "1:2: unknown key \"profil\" in a profile | did you mean \"profile\"?");
      got.pop_back();
    }
    EXPECT_EQ(got, Lines{c.problem}) << "instead of " << c.from;
  }
}

TEST(Profile, anOpenRelayMayLeak) {
  Diagnostics diagnostics;
  const std::string text = sample::spoilt(sample::kProfile, "contact_resistance = \"100 mohm\"",
                                          "contact_resistance = \"100 mohm\"\nleakage = \"10 Gohm\"");
  const auto profile = loadProfile("p.toml", sample::reader({{"p.toml", text}}), diagnostics);
  ASSERT_TRUE(profile) << diagnostics.render(false);
  EXPECT_EQ(profile->relays->leakage, 10.0 * units::gigaohm);
  EXPECT_EQ(sample::profileProblems(sample::spoilt(text, "10 Gohm", "10 ohm")).size(), 1u) << "that is no insulation";
}

TEST(Profile, needsSomethingToDo) {
  EXPECT_EQ(
      sample::profileProblems("[profile]\nname = \"x\"\n"),
      Lines{
          "1:1: the profile has neither [inputs] nor [relays] | say what the device can do: [inputs] for an "
          "amplifier, [relays] for a relay board"});
}

TEST(Profile, needsToSayHowToReadAndHowToSwitch) {
  const Lines got = sample::profileProblems(
      "[profile]\nname = \"x\"\n[inputs]\ncount = 1\ngives = \"V/V\"\nfull_scale = \"4 mV/V\"\n"
      "excitations = [\"5 V\"]\nrates = [\"1 Hz\"]\n[relays]\ncount = 1\n");
  EXPECT_EQ(
      got,
      (Lines{"3:1: [inputs] does not say how values are read | add [inputs.read] for a polled amplifier or "
             "[inputs.stream] for a streaming one",
             "9:1: \"close\" is missing from [relays] | add it: close = { ask = \"close {relay}\", answer = "
             "\"OK\" }",
             "9:1: \"open\" is missing from [relays] | add it: open = { ask = \"open {relay}\", answer = "
             "\"OK\" }"}));
}

TEST(KindOfFile, looksAtTheTopLevelTables) {
  EXPECT_EQ(kindOfFile("# comment\n  [profile]\n"), "profile");
  EXPECT_EQ(kindOfFile("[rack]\n[profile]"), "rack");
  EXPECT_EQ(kindOfFile("x = 1\n[racks]\n"), "");
  EXPECT_EQ(kindOfFile(""), "");
}

}  // namespace
