// proves P-03
#include "driver/description/rack.h"

#include <gtest/gtest.h>

#include "driver/units/copper.h"
#include "tests/driver/description/sample.h"

namespace {

using namespace shuntwright;
using namespace shuntwright::description;
using enum Terminal;
using Lines = std::vector<std::string>;

Rack load(const std::string& text) {
  Diagnostics d;
  auto rack = loadRack("b/rack.toml",
                       sample::reader({{"b/rack.toml", text}, {"p/device.toml", sample::kProfile}}), d);
  EXPECT_TRUE(rack && d.problems().empty()) << d.render(false);
  return rack ? *std::move(rack) : Rack{};
}

TEST(Rack, readsEveryPart) {
  const Rack rack = load(sample::kRack);
  EXPECT_EQ(rack.file, "b/rack.toml");
  EXPECT_EQ(rack.text, sample::kRack);
  EXPECT_EQ(rack.name, "bench");
  ASSERT_EQ(rack.devices.size(), 1u);
  const Device& device = rack.devices[0];
  EXPECT_EQ(device.profile->name, "sample");
  EXPECT_EQ(device.profile->file, "p/device.toml");
  EXPECT_EQ(device.port.kind, Port::Kind::tcp);
  EXPECT_EQ(device.port.path, "127.0.0.1");
  EXPECT_EQ(device.port.tcpPort, 47001);
  EXPECT_EQ(device.rate, 100.0 * units::hertz);
  EXPECT_EQ(rack.device("amp1"), &device);
  EXPECT_EQ(rack.device("amp2"), nullptr);

  const Channel& s01 = *rack.channel("S01");
  EXPECT_EQ(s01.place, (Place{"b/rack.toml", 19, 1}));
  EXPECT_EQ(s01.circuit, CircuitKind::quarter_3_wire);
  EXPECT_EQ(rack.gaugeOf(s01).factor.value(), 2.1);
  EXPECT_EQ(s01.completion, 350.0 * units::ohm);  // the one that suits the gauge
  EXPECT_EQ(s01.excitation, 5.0 * units::volt);
  EXPECT_EQ(s01.leadLoss, LeadLoss::in_prediction);
  ASSERT_EQ(s01.shunts.size(), 1u);
  EXPECT_EQ(s01.shunts[0].relay, (RelayRef{"amp1", 1}));
  EXPECT_EQ(rack.resistorOf(s01.shunts[0]).value.in(units::ohm), 174650.0);
  EXPECT_EQ(s01.shunts[0].across, std::pair(exc_plus, comp));
  EXPECT_EQ(s01.shunts[0].side, Side::instrument);
  ASSERT_EQ(s01.leads.size(), 3u);
  EXPECT_EQ(s01.leads.at(comp).resistance,
            units::copperLead(20.0 * units::metre, 26, units::Temperature::celsius(20)));

  const Channel& f1 = *rack.channel("F1");
  EXPECT_EQ(f1.transducer->ratedValue, 50);
  EXPECT_EQ(f1.transducer->unit, "kN");
  EXPECT_EQ(f1.transducer->sensitivity, 2.0 * units::millivolt_per_volt);
  EXPECT_EQ(f1.excitation, 2.5 * units::volt);  // the profile's first
  EXPECT_EQ(f1.leads.size(), 4u);
  EXPECT_TRUE(f1.shunts.empty());
}

TEST(Rack, wordsOfPositionsMeanTerminals) {
  struct Case {
    const char* circuit;
    const char* words;
    std::pair<Terminal, Terminal> across;
    Side side;
  };
  const Case cases[] = {
      {"quarter 3-wire", "\"completion\"", {exc_plus, comp}, Side::instrument},
      {"quarter 2-wire", "\"completion\"", {exc_plus, sig_plus}, Side::instrument},
      {"half opposite", "\"completion\"", {exc_plus, sig_plus}, Side::instrument},
      {"quarter 3-wire", "\"gauge\"", {sig_plus, exc_minus}, Side::gauge},
      {"full bending", "\"gauge\"", {sig_plus, exc_minus}, Side::gauge},
      {"quarter 2-wire", "\"half bridge upper\"", {exc_plus, sig_minus}, Side::instrument},
      {"half Poisson", "\"half bridge lower\"", {sig_minus, exc_minus}, Side::instrument},
      {"full shear", "\"signal to excitation\"", {sig_plus, exc_minus}, Side::instrument},
      {"quarter 3-wire", "[\"COMP\", \"EXC-\"]", {comp, exc_minus}, Side::instrument},
      {"full bending", "[\"EXC+\", \"SIG-\"], at = \"gauge\"", {exc_plus, sig_minus}, Side::gauge},
  };
  for (const Case& c : cases) {
    std::string text =
        sample::spoilt(sample::kRack, "\"quarter 3-wire\"", '"' + std::string(c.circuit) + '"');
    text = sample::spoilt(text, "\"completion\"", c.words);
    const Rack rack = load(text);
    ASSERT_EQ(rack.channels.size(), 2u) << c.circuit;
    EXPECT_EQ(rack.channels[0].shunts.at(0).across, c.across) << c.circuit << ' ' << c.words;
    EXPECT_EQ(rack.channels[0].shunts.at(0).side, c.side) << c.circuit << ' ' << c.words;
  }
}

TEST(Rack, leadsAreGivenAlikeOrWireByWire) {
  const auto leads = [](const std::string& text) {
    return load(sample::spoilt(sample::kRack, "{ length = \"20 m\", awg = 26 }", text)).channels.at(0).leads;
  };
  const auto alike = leads("{ each = \"2.7 ohm\", tolerance = \"1 %\", temperature = \"30 degC\" }");
  for (const Terminal t : {exc_minus, comp, sig_plus}) {
    EXPECT_EQ(alike.at(t).resistance, 2.7 * units::ohm);
    EXPECT_EQ(alike.at(t).tolerance, 1.0 * units::percent);
    EXPECT_EQ(alike.at(t).temperature, units::Temperature::celsius(30));
    EXPECT_EQ(alike.at(t).temperatureTolerance, 5.0 * units::kelvin);  // the default
  }
  const auto single = leads(
      "{ \"EXC-\" = \"2.7 ohm\", COMP = { resistance = \"3 ohm\", tolerance = \"4 %\" }, "
      "\"SIG+\" = { length = \"10 m\", awg = 24 }, tolerance = \"1 %\", temperature = \"40 degC\" }");
  EXPECT_EQ(single.at(exc_minus).resistance, 2.7 * units::ohm);
  EXPECT_EQ(single.at(exc_minus).tolerance, 1.0 * units::percent);
  EXPECT_EQ(single.at(comp).resistance, 3.0 * units::ohm);
  EXPECT_EQ(single.at(comp).tolerance, 4.0 * units::percent);
  EXPECT_EQ(single.at(sig_plus).resistance,
            units::copperLead(10.0 * units::metre, 24, units::Temperature::celsius(40)));
  const auto oneDiffers = leads("{ each = \"2.7 ohm\", COMP = \"3 ohm\" }");
  EXPECT_EQ(oneDiffers.at(exc_minus).resistance, 2.7 * units::ohm);
  EXPECT_EQ(oneDiffers.at(comp).resistance, 3.0 * units::ohm);
}

TEST(Rack, defaultsFillWhatAChannelLeavesOut) {
  const std::string defaults =
      "[channel_defaults]\nexcitation = \"5 V\"\ncompletion = \"120 ohm\"\nsensed = true\ngauge = \"G350\"\n"
      "leads = { length = \"9 m\", awg = 24, tolerance = \"7 %\" }\n\n[[channel]]\nname = \"S01\"";
  std::string text = sample::spoilt(sample::kRack, "[[channel]]\nname = \"S01\"", defaults);
  text = sample::spoilt(text, "{ length = \"20 m\", awg = 26 }", "{ length = \"20 m\" }");
  const Rack rack = load(text);
  ASSERT_EQ(rack.channels.size(), 2u);
  const Lead& lead = rack.channels[0].leads.at(comp);
  EXPECT_EQ(lead.length, 20.0 * units::metre);  // its own
  EXPECT_EQ(lead.awg, 24);                      // merged within the table
  EXPECT_EQ(lead.tolerance, 7.0 * units::percent);
  EXPECT_EQ(rack.channels[0].completion, 120.0 * units::ohm);
  EXPECT_FALSE(rack.channels[0].sensed);  // a quarter bridge has nothing to sense
  EXPECT_TRUE(rack.channels[1].sensed);
  EXPECT_EQ(rack.channels[1].excitation, 5.0 * units::volt);
  EXPECT_EQ(rack.channels[1].gauge, "");  // a transducer has none
  EXPECT_EQ(rack.channels[1].completion, std::nullopt);
  EXPECT_EQ(rack.channels[1].leads.at(exc_plus).resistance,
            0.5 * units::ohm);  // `each` stands above length and awg
  EXPECT_EQ(rack.channels[1].leads.at(exc_plus).length, std::nullopt);
}

TEST(Rack, aCertificateStandsAboveATolerance) {
  const Rack rack =
      load(sample::spoilt(sample::kRack, "[resistor.RC]\nvalue = \"174.65 kohm\"\ntolerance = \"0.1 %\"",
                          "[resistor_defaults]\ntolerance = \"0.1 %\"\n[resistor]\n"
                          "RC = { value = \"174.65 kohm\", expanded_uncertainty = \"0.01 %\" }\n"
                          "RD = { value = \"59.88 kohm\" }"));
  EXPECT_EQ(rack.resistors.at("RC").tolerance, 0.0 * units::percent);
  EXPECT_EQ(rack.resistors.at("RC").expandedUncertainty, 0.01 * units::percent);
  EXPECT_EQ(rack.resistors.at("RD").tolerance, 0.1 * units::percent);
}

TEST(Rack, portsAreOfThreeKinds) {
  const auto port = [](const std::string& text) {
    return load(sample::spoilt(sample::kRack, "tcp:127.0.0.1:47001", text)).devices.at(0).port;
  };
  EXPECT_EQ(port("serial:/dev/ttyUSB0").kind, Port::Kind::serial);
  EXPECT_EQ(port("serial:/dev/ttyUSB0").path, "/dev/ttyUSB0");
  EXPECT_EQ(port("replay:trace:1.jsonl").kind, Port::Kind::replay);
  EXPECT_EQ(port("replay:trace:1.jsonl").path, "trace:1.jsonl");
  EXPECT_EQ(port("tcp:amp.local").tcpPort, 5025);  // the profile's
  EXPECT_EQ(port("tcp:[::1]:99").path, "::1");
  EXPECT_EQ(port("tcp:[::1]:99").tcpPort, 99);
  EXPECT_EQ(port("tcp:[::1]").tcpPort, 5025);
}

TEST(Rack, reportsOneMistakeAtItsPlace) {
  struct Case {
    const char* from;
    const char* to;
    const char* problem;
  };
  const Case cases[] = {
      {"[rack]\nname = \"bench\"", "[rack]\nname = \"\"",
       "2:8: \"\" is no name | a name is not empty and has no control characters and no blanks at its ends"},
      {"rate = \"100 Hz\"", "rate = \"99 Hz\"",
       "9:8: device \"amp1\" has no rate of 99 Hz | it offers 10 Hz, 100 Hz"},
      {"name = \"amp1\"", "name = \"a/b\"",
       "6:8: a device's name cannot hold \"/\" | \"/\" stands between device and relay in \"relays1/3\""},
      {"../p/device.toml", "device.toml",
       "7:11: the profile \"device.toml\" cannot be read | it is looked for at \"b/device.toml\"; paths are "
       "relative to "
       "the rack's own folder"},
      {"tcp:127.0.0.1:47001", "tcp:127.0.0.1:x",
       "8:8: \"x\" is no TCP port number | it must be between 1 and 65535"},
      {"tcp:127.0.0.1:47001", "usb:1",
       "8:8: the port \"usb:1\" cannot be read | write \"serial:/dev/ttyUSB0\", \"tcp:127.0.0.1:5025\" or "
       "\"replay:FILE\""},
      {"factor = 2.1", "factor = \"2.1\"",
       "12:10: \"factor\" must be a number, not a string | write a number without quotes and without a unit"},
      {"\"350 ohm\"", "\"350 Ohms\"",
       "13:14: \"resistance\": unknown unit \"Ohms\" for a resistance | did you mean \"350 ohm\"?"},
      {"tolerance = \"0.1 %\"\n", "",
       "15:1: resistor \"RC\" has neither tolerance nor expanded uncertainty | add tolerance = \"0.1 %\", or "
       "expanded_uncertainty = \"0.01 %\" from its certificate"},
      {"tolerance = \"0.1 %\"", "tolerance = \"30 %\"",
       "17:13: \"tolerance\" is out of range: \"30 %\" | it must be between 0 % and 20 %"},
      {"input = 1", "input = 5", "22:9: device \"amp1\" has no input 5 | its inputs are 1 to 4"},
      {"input = 1\n", "", "19:1: \"input\" is missing from channel \"S01\" | add it: input = 1"},
      {"circuit = \"quarter 3-wire\"", "circuit = \"quarter 3 wire\"",
       "23:11: no circuit is called \"quarter 3 wire\" | did you mean \"quarter 3-wire\"?"},
      {"gauge = \"G350\"", "gauge = \"G35O\"", "24:9: no gauge is called \"G35O\" | did you mean \"G350\"?"},
      {"gauge = \"G350\"", "guage = \"G350\"",
       "24:1: unknown key \"guage\" in channel \"S01\" | did you mean \"gauge\"?"},
      {"gauge = \"G350\"", "gauge = \"G350\"\ngauge_resistance = { value = \"350.1 ohm\" }",
       "25:20: \"uncertainty\" is missing from \"gauge_resistance\" | add it: uncertainty = \"0.02 %\""},
      {"gauge = \"G350\"", "gauge = \"G350\"\narms = { 2 = { factor = 2.1 } }",
       "25:10: arm 2 of a quarter 3-wire is no gauge | its gauges are in arms 1"},
      {"gauge = \"G350\"", "gauge = \"G350\"\narms = { 5 = { factor = 2.1 } }",
       "25:10: a bridge has no arm \"5\" | its gauges are in arms 1"},
      {"gauge = \"G350\"", "gauge = \"G350\"\narms = { 1 = 2.1 }",
       "25:14: arm 1 must be a table | write it like 1 = { resistance = \"350.4 ohm\", uncertainty = \"0.02 %\" }"},
      {"gauge = \"G350\"", "gauge = \"G350\"\narms = { 1 = { resistance = \"350.2 ohm\" } }",
       "25:14: \"uncertainty\" is missing from arm 1 of channel \"S01\" | add it: uncertainty = \"0.02 %\""},
      {"gauge = \"G350\"", "gauge = \"G350\"\narms = { 1 = { uncertainty = \"0.1 %\" } }",
       "25:16: an uncertainty without the resistance it belongs to | add resistance = \"350.4 ohm\""},
      {"gauge = \"G350\"", "gauge = \"G350\"\narms = { 1 = { factor_tolerance = \"0.1 %\" } }",
       "25:16: a tolerance without the factor it belongs to | add factor = 2.08, or take it out: the gauge's own "
       "tolerance holds"},
      {"gauge = \"G350\"", "gauge = \"G350\"\narms = { 1 = { factor = 0.1 } }",
       "25:25: \"factor\" is out of range: 0.1 | it must be between 0.5 and 200"},
      {"gauge = \"G350\"",
       "gauge = \"G350\"\ngauge_resistance = { value = \"350 ohm\", uncertainty = \"0.02 %\" }\n"
       "arms = { 1 = { resistance = \"350 ohm\", uncertainty = \"0.02 %\" } }",
       "26:16: the resistance of arm 1 is given twice: here and by \"gauge_resistance\" | keep one of the two"},
      {"gauge = \"G350\"", "gauge = \"G350\"\ncompletion = \"1 kohm\"",
       "25:14: device \"amp1\" has no completion resistor of 1 kohm | its completion resistors are 120 ohm, "
       "350 ohm"},
      {"gauge = \"G350\"", "gauge = \"G350\"\nsensed = true",
       "25:1: a quarter 3-wire circuit has no sense leads | sensing needs a full bridge or a transducer"},
      {"gauge = \"G350\"", "gauge = \"G350\"\nlead_loss = \"identified\"",
       "25:1: leads cannot be identified from 1 shunt | add a second position for the same resistor, such as across = "
       "[\"COMP\", \"EXC-\"], or use lead_loss = \"in prediction\""},
      {"gauge = \"G350\"", "gauge = \"G350\"\nlead_loss = \"in the span\"",
       "25:13: \"lead_loss\" cannot be \"in the span\" | it must be \"in prediction\", \"in span\" or \"identified\""},
      {"leads = { length = \"20 m\", awg = 26 }\n", "",
       "19:1: \"leads\" is missing from channel \"S01\" | add it: leads = { length = \"20 m\", awg = 26 }"},
      {"{ length = \"20 m\", awg = 26 }", "{ length = \"20 m\" }",
       "25:9: \"awg\" is missing from the leads of channel \"S01\" | add it: awg = 26"},
      {"{ length = \"20 m\", awg = 26 }", "{ each = \"1 ohm\", awg = 26 }",
       "25:11: the resistance is given twice: by \"each\" and by length and awg | keep one of the two"},
      {"{ length = \"20 m\", awg = 26 }", "{ \"EXC-\" = \"1 ohm\", \"SIG+\" = \"1 ohm\" }",
       "25:9: COMP missing from the leads of channel \"S01\" | give each wire of the quarter 3-wire circuit "
       "its "
       "resistance, or "
       "all of them by each = \"2.7 ohm\" or by length and awg"},
      {"{ length = \"20 m\", awg = 26 }", "{ each = \"1 ohm\", \"SIG-\" = \"1 ohm\" }",
       "25:27: a quarter 3-wire circuit has no lead SIG- | its leads are EXC-, COMP, SIG+"},
      {"{ length = \"20 m\", awg = 26 }", "{ each = \"1 ohm\", \"COMP\" = {} }",
       "25:36: the lead COMP has neither resistance nor length and awg | add resistance = \"2.7 ohm\", or "
       "length = "
       "\"20 m\" and awg = 26"},
      {"{ length = \"20 m\", awg = 26 }", "{ each = \"1 ohm\", temprature = \"20 degC\" }",
       "25:27: unknown key \"temprature\" in the leads of channel \"S01\" | did you mean \"temperature\"?"},
      {"excitation = \"5 V\"", "excitation = \"10 V\"",
       "26:14: device \"amp1\" has no excitation of 10 V | it offers 2.5 V, 5 V"},
      {"resistor = \"RC\"", "resistor = \"RX\"",
       "27:38: no resistor is called \"RX\" | did you mean \"RC\"?"},
      {"relay = \"amp1/1\"", "relay = \"amp1/9\"",
       "27:52: device \"amp1\" has no relay 9 | its relays are 1 to 8"},
      {"relay = \"amp1/1\"", "relay = \"amp2/1\"",
       "27:52: no device is called \"amp2\" | did you mean \"amp1\"?"},
      {"relay = \"amp1/1\"", "relay = \"amp1\"",
       "27:52: \"amp1\" names no relay | write device/number: \"relays1/3\""},
      {"across = \"completion\"", "across = \"completoin\"",
       "27:71: \"across\" cannot be \"completoin\" | did you mean \"completion\"?"},
      {"across = \"completion\"", "across = \"completion\", at = \"gauge\"",
       "27:90: \"completion\" is a position at the instrument | take \"at\" out, or name two terminals in "
       "\"across\""},
      {"across = \"completion\"", "across = [\"EXC+\"]",
       "27:71: \"across\" names 1 terminals instead of two | write it like [\"EXC+\", \"SIG-\"]"},
      {"across = \"completion\"", "across = [\"EXC+\", \"SENSE+\"]",
       "27:80: a quarter 3-wire circuit has no terminal \"SENSE+\" at the instrument | it can be \"EXC-\", "
       "\"COMP\", "
       "\"SIG+\", \"EXC+\" or \"SIG-\""},
      {"across = \"completion\"", "across = [\"COMP\", \"SIG+\"], at = \"gauge\"",
       "27:71: COMP and SIG+ are one point at the gauge | a shunt goes between two different points"},
      {"transducer = { sensitivity", "gauge = \"G350\"\ntransducer = { sensitivity",
       "34:1: a transducer circuit has no gauge of its own | describe it by transducer = { ... } instead"},
      {"transducer = { sensitivity = \"2 mV/V\", rated_value = 50, unit = \"kN\" }\n", "",
       "29:1: \"transducer\" is missing from channel \"F1\" | add it: transducer = { sensitivity = \"2 "
       "mV/V\", "
       "rated_value = 50, "
       "unit = \"kN\" }"},
      {"leads = { each = \"0.5 ohm\" }", "leads = { each = \"0.5 ohm\" }\narms = { 1 = { factor = 2 } }",
       "36:1: a transducer circuit has no gauges of its own | take \"arms\" out"},
      {"unit = \"kN\" }",
       "unit = \"kN\", certificate_shunt = { resistance = \"100 kohm\", step = \"0.873 mV/V\", tolerance = \"0.1 %\", "
       "across = [\"SIG-\", \"SENSE+\"] } }",
       "34:178: a transducer has no terminal \"SENSE+\" to put a resistor on | it can be \"EXC+\", \"EXC-\", \"SIG+\" or "
       "\"SIG-\""},
      {"unit = \"kN\" }",
       "unit = \"kN\", certificate_shunt = { resistance = \"100 kohm\", step = \"0.873 mV/V\", tolerance = \"0.1 %\", "
       "across = [\"EXC+\", \"EXC-\"] } }",
       "34:169: a resistor there is across no arm of the transducer | name one excitation and one signal terminal: "
       "[\"SIG-\", \"EXC-\"]"},
      {"unit = \"kN\" }",
       "unit = \"kN\", output_resistance_tolerance = \"1 %\", certificate_shunt = { resistance = \"100 kohm\", step = "
       "\"0.873 mV/V\", tolerance = \"0.1 %\", across = [\"SIG-\", \"EXC-\"] } }",
       "34:71: the certificate's shunt says what the output resistance does to a step, and how well | take "
       "\"output_resistance_tolerance\" out"},
      {"{ each = \"0.5 ohm\" }",
       "{ each = \"0.5 ohm\" }\nshunts = [{ resistor = \"RC\", relay = \"amp1/2\", across = "
       "\"half bridge upper\" }]",
       "36:57: a transducer circuit has no \"half bridge upper\" to put a shunt across | here it can be "
       "\"signal to "
       "excitation\", or two terminals: [\"EXC+\", \"SIG+\"]"},
      {"{ each = \"0.5 ohm\" }",
       "{ each = \"0.5 ohm\" }\nshunts = [{ resistor = \"RC\", relay = \"amp1/1\", across = "
       "\"signal to excitation\" }]",
       "36:11: relay amp1/1 switches two shunts: of \"S01\" and of \"F1\" | the other channel stands in line "
       "19; each "
       "relay switches one shunt"},
      {"name = \"F1\"", "name = \"S01\"",
       "29:1: two channels are called \"S01\" | the other one stands in line 19; rename one"},
      {"input = 2", "input = 1",
       "29:1: channels \"S01\" and \"F1\" are both on input 1 of \"amp1\" | the other one stands in line 19; "
       "each input "
       "carries one channel"},
      {"[gauge.G350]",
       "[[device]]\nname = \"amp1\"\nprofile = \"../p/device.toml\"\nport = \"replay:x\"\n[gauge.G350]",
       "12:8: two devices are called \"amp1\" | the other one stands in line 5; rename one"},
      {"[gauge.G350]",
       "[[device]]\nname = \"a2\"\nprofile = \"../p/device.toml\"\nport = "
       "\"tcp:127.0.0.1:47001\"\n[gauge.G350]",
       "11:1: devices \"amp1\" and \"a2\" are on the same port \"tcp:127.0.0.1:47001\" | give each its own "
       "port"},
      {"[gauge.G350]", "[gauge]\nfactor = 2\n[gauge.G350]",
       "12:1: \"factor\" stands in [gauge] itself | name the gauge: [gauge.NAME]"},
      {"[gauge.G350]", "[limits]\nnoise = \"5 mV/V\"\n[gauge.G350]",
       "12:9: \"noise\": unknown unit \"mV/V\" for a strain | units of strain: microstrain"},
      {"[gauge.G350]", "[calibration]\nrepeats = 0\n[gauge.G350]",
       "12:11: \"repeats\" is out of range: 0 | it must be between 1 and 100"},
      {"[gauge.G350]", "[gauges.X]\n[gauge.G350]",
       "11:2: unknown key \"gauges\" in a rack | did you mean \"gauge\"?"},
  };
  for (const Case& c : cases) {
    Lines got = sample::rackProblems(sample::spoilt(sample::kRack, c.from, c.to));
    const std::string to = c.to;
    // A misspelt key is missing under its right name, and a lost name leaves its users without it.
    if (to.starts_with("guage")) std::erase(got, "19:1: \"gauge\" is missing from channel \"S01\" | add it");
    if (to.find("a/b") != std::string::npos)
      std::erase_if(
          got, [](const std::string& line) { return line.find("is called \"amp1\"") != std::string::npos; });
    EXPECT_EQ(got, Lines{c.problem}) << "instead of " << c.from;
  }
}

TEST(Rack, gaugesOfOneBridgeMayDiffer) {
  std::string text = sample::spoilt(sample::kRack, "\"quarter 3-wire\"", "\"half bending\"");
  text = sample::spoilt(text, "\"completion\"", "\"gauge\"");
  text = sample::spoilt(text, "gauge = \"G350\"",
                        "gauge = \"G350\"\n"
                        "arms = { 1 = { resistance = \"350.4 ohm\", uncertainty = \"0.02 %\" }, "
                        "2 = { factor = 2.05, factor_tolerance = \"0.5 %\" } }");
  const Rack rack = load(text);
  const Channel& channel = *rack.channel("S01");
  const GaugeOfArm first = rack.gaugeOf(channel, 0), second = rack.gaugeOf(channel, 1);
  EXPECT_TRUE(first.measured);
  EXPECT_EQ(first.resistance.value, 350.4 * units::ohm);
  EXPECT_EQ(first.resistance.tolerance, 0.02 * units::percent);
  EXPECT_EQ(first.factor.value(), 2.1);
  EXPECT_FALSE(second.measured);
  EXPECT_EQ(second.resistance.value, 350.0 * units::ohm);
  EXPECT_EQ(second.factor.value(), 2.05);
  EXPECT_EQ(second.factorTolerance, 0.5 * units::percent);
}

TEST(Rack, warnsOfAGaugeFarOffItsNominal) {
  Diagnostics d;
  const std::string text = sample::spoilt(
      sample::kRack, "gauge = \"G350\"",
      "gauge = \"G350\"\ngauge_resistance = { value = \"320 ohm\", uncertainty = \"0.02 %\" }");
  EXPECT_TRUE(loadRack("b/rack.toml",
                       sample::reader({{"b/rack.toml", text}, {"p/device.toml", sample::kProfile}}), d));
  EXPECT_EQ(
      sample::lines(d),
      Lines{
          "25:30: the measured gauge resistance 320 ohm is more than 5 % off the nominal 350 ohm | check the "
          "reading and the gauge's name"});
  EXPECT_TRUE(d.ok());
}

TEST(Rack, aHalfBridgeThatTheProfileDoesNotStateIsNotAssumed) {
  const std::string none = sample::spoilt(sample::kProfile, "half_bridge = { value = \"1 kohm\", tolerance = \"0.02 %\" }\n", "");
  EXPECT_EQ(sample::rackProblems(sample::kRack, none),
            (Lines{"23:11: a quarter 3-wire is completed by the amplifier's half bridge, and \"amp1\" has none | state "
                   "half_bridge = { value = \"1 kohm\", tolerance = \"0.02 %\" } in [inputs] of p/device.toml"}));
}

TEST(Rack, aTransducersInputResistanceIsNotBelowItsOutputResistance) {
  const Lines got = sample::rackProblems(
      sample::spoilt(sample::kRack, "transducer = { ", "transducer = { output_resistance = \"390 ohm\", "));
  EXPECT_EQ(got, (Lines{"34:14: the input resistance 380 ohm is below the output resistance 390 ohm | swap them: the "
                        "compensation resistors stand in the excitation lines"}));
}

TEST(Rack, oneTraceMayHoldSeveralDevices) {
  const std::string traced = sample::spoilt(sample::kRack, "tcp:127.0.0.1:47001", "replay:x");
  EXPECT_EQ(sample::rackProblems(sample::spoilt(
                traced, "[gauge.G350]", "[[device]]\nname = \"a2\"\nprofile = \"../p/device.toml\"\nport = \"replay:x\"\n[gauge.G350]")),
            Lines{});
}

TEST(Rack, mistakesInDefaultsAreSaidOnce) {
  const Lines got =
      sample::rackProblems(sample::spoilt(sample::kRack, "[[channel]]\nname = \"S01\"",
                                          "[channel_defaults]\ncolour = 1\n[[channel]]\nname = \"S01\""));
  EXPECT_EQ(got.size(), 1u);
}

TEST(Rack, mistakesInAProfileAreToldAtThatProfile) {
  const std::string profile = sample::spoilt(sample::kProfile, "count = 4", "count = 0");
  EXPECT_EQ(sample::rackProblems(sample::kRack, profile),
            Lines{"p/device.toml:27:9: \"count\" is out of range: 0 | it must be between 1 and 4096"});
}

TEST(Rack, aSyntaxErrorIsReportedAlone) {
  std::string text = sample::spoilt(sample::kRack, "gauge = \"G350\"", "guage = \"G350\"");
  text = sample::spoilt(text, "rate = \"100 Hz\"", "rate = 100 Hz");
  const Lines got = sample::rackProblems(text);
  ASSERT_EQ(got.size(), 1u);
  EXPECT_TRUE(got[0].starts_with("9:12: syntax: ")) << got[0];
}

TEST(Rack, whatIsNoRackIsSaidToBeNone) {
  Diagnostics d;
  EXPECT_FALSE(loadRack("gone.toml", sample::reader({}), d));
  ASSERT_EQ(d.problems().size(), 1u);
  EXPECT_EQ(d.render(false),
            "gone.toml: error: the file cannot be read\n  = help: check its path and permissions\n");
  const Lines got = sample::rackProblems("");
  EXPECT_EQ(
      got,
      (Lines{"1:1: this is no rack: it has no [rack] table | begin with [rack], name = \"...\" and title = "
             "\"...\"",
             "1:1: the rack has no devices | add a [[device]] table with name, profile and port"}));
}

// Ten mistakes of meaning in one rack: ten located messages, each with its remedy.
TEST(Rack, tenMistakesGiveTenMessages) {
  const std::string text = R"([rack]
name = "ten"

[[device]]
name = "amp1"
profile = "../p/device.toml"
port = "tcp:127.0.0.1:47001"
rate = "75 Hz"

[gauge.G350]
factor = 2.1
resistance = "350 Ohms"

[resistor.RC]
value = "174.65 kohm"
tolerence = "0.1 %"
tolerance = "0.1 %"

[[channel]]
name = "S01"
device = "amp1"
input = 1
circuit = "quarter 3-wire"
gauge = "G530"
completion = "350 ohm"
leads = { each = "2.7 ohm" }
excitation = "7 V"
shunts = [{ resistor = "RC", relay = "amp1/12", across = "completion" }]

[[channel]]
name = "S02"
device = "amp1"
input = 1
circuit = "half bending"
gauge = "G350"
leads = { "EXC+" = "1 ohm", "SIG+" = "1 ohm", "EXC-" = "1 ohm", "SIG-" = "1 ohm" }
shunts = [{ resistor = "RC", relay = "amp1/2", across = "completion" }]

[[channel]]
name = "S03"
device = "amp1"
input = 3
circuit = "quarter 2-wire"
gauge = "G350"
completion = "350 ohm"
leads = { "EXC-" = "1 ohm" }
shunts = [{ resistor = "RC", relay = "amp1/3", across = "completion" }]
)";
  EXPECT_EQ(sample::rackProblems(text),
            (Lines{
                "8:8: device \"amp1\" has no rate of 75 Hz | it offers 10 Hz, 100 Hz",
                "12:14: \"resistance\": unknown unit \"Ohms\" for a resistance | did you mean \"350 ohm\"?",
                "16:1: unknown key \"tolerence\" in resistor \"RC\" | did you mean \"tolerance\"?",
                "24:9: no gauge is called \"G530\" | did you mean \"G350\"?",
                "27:14: device \"amp1\" has no excitation of 7 V | it offers 2.5 V, 5 V",
                "28:38: device \"amp1\" has no relay 12 | its relays are 1 to 8",
                "30:1: channels \"S01\" and \"S02\" are both on input 1 of \"amp1\" | the other one stands "
                "in line 19; each "
                "input carries one channel",
                "36:65: a half bending circuit has no lead SIG- | its leads are EXC+, SIG+, EXC-",
                "37:57: a half bending circuit has no \"completion\" to put a shunt across | here it can be "
                "\"gauge\", "
                "\"half bridge upper\", \"half bridge lower\" or \"signal to excitation\", or two terminals: "
                "[\"EXC+\", "
                "\"SIG+\"]",
                "46:9: SIG+ missing from the leads of channel \"S03\" | give each wire of the quarter 2-wire "
                "circuit "
                "its resistance, "
                "or all of them by each = \"2.7 ohm\" or by length and awg",
            }));
}

}  // namespace
