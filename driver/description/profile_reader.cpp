#include <algorithm>
#include <set>

#include "driver/description/readers.h"

namespace shuntwright::description {
namespace {

using Fields = std::vector<std::string_view>;

/// Which fields an exchange may hold, and which it must.
struct ExchangeRule {
  Fields askFields;
  Fields neededInAsk;
  Fields answerFields;
  Fields neededInAnswer;  ///< not empty: an answer must be described
};

class ProfileReader {
 public:
  ProfileReader(const TomlNode& root, const std::string& file, Diagnostics& diagnostics)
      : root_(root, "a profile", diagnostics), diagnostics_(diagnostics) {
    profile_.file = file;
  }

  Profile read() {
    readHead();
    if (const TomlNode* reach = root_.table("reach")) readReach(*reach);
    if (const TomlNode* text = root_.table("text")) readText(*text);
    if (const TomlNode* identify = root_.table("identify")) readIdentify(*identify);
    for (const TomlNode* error : root_.tables("error")) readError(*error);
    if (const TomlNode* inputs = root_.table("inputs")) readInputs(*inputs);
    if (const TomlNode* relays = root_.table("relays")) readRelays(*relays);
    root_.finish();
    if (!root_.has("inputs") && !root_.has("relays"))
      diagnostics_.error(root_.place(), "the profile has neither [inputs] nor [relays]",
                         "say what the device can do: [inputs] for an amplifier, [relays] for a relay board");
    return std::move(profile_);
  }

 private:
  void readHead() {
    if (!root_.has("profile")) {
      diagnostics_.error(root_.place(), "this is no profile: it has no [profile] table",
                         "begin with [profile], name = \"...\" and title = \"...\"");
      return;
    }
    const TomlNode* head = root_.table("profile");
    if (!head) return;
    TableReader reader(*head, "[profile]", diagnostics_);
    readName(reader, profile_.name, diagnostics_);
    reader.take("title", profile_.title);
    enum class Protocol { text } protocol = Protocol::text;
    reader.choose("protocol", protocol, {{"text", Protocol::text}});
    reader.finish();
  }

  void readReach(const TomlNode& table) {
    TableReader reader(table, "[reach]", diagnostics_);
    if (const TomlNode* serial = reader.table("serial")) {
      SerialSettings out;
      TableReader inner(*serial, "[reach.serial]", diagnostics_);
      inner.take("baud", out.baud, {"50", "20000000"});
      inner.take("data_bits", out.dataBits, {"7", "8"});
      inner.take("stop_bits", out.stopBits, {"1", "2"});
      using Parity = SerialSettings::Parity;
      inner.choose("parity", out.parity,
                   {{"none", Parity::none}, {"even", Parity::even}, {"odd", Parity::odd}});
      using Flow = SerialSettings::Flow;
      inner.choose("flow", out.flow,
                   {{"none", Flow::none}, {"hardware", Flow::hardware}, {"software", Flow::software}});
      inner.finish();
      profile_.serial = out;
    }
    if (const TomlNode* tcp = reader.table("tcp")) {
      TcpSettings out;
      TableReader inner(*tcp, "[reach.tcp]", diagnostics_);
      inner.need("port", out.port, {"1", "65535"}, "5025");
      inner.finish();
      profile_.tcp = out;
    }
    reader.finish();
    if (!reader.has("serial") && !reader.has("tcp"))
      diagnostics_.error(reader.place(), "[reach] names no way to the device",
                         "add [reach.serial] or [reach.tcp]");
  }

  void readText(const TomlNode& table) {
    TextProtocol& out = profile_.protocol;
    out.place = table.place;
    TableReader reader(table, "[text]", diagnostics_);
    for (auto [key, end] :
         {std::pair("request_end", &out.requestEnd), std::pair("answer_end", &out.answerEnd)})
      if (reader.take(key, *end) && end->empty())
        diagnostics_.error(reader.entry(key)->value.place, std::string(key) + " is empty",
                           "a line ends with one or more characters, for instance \"\\r\\n\"");
    reader.take("echo", out.echo);
    reader.take("timeout", out.timeout, {"1 ms", "60 s"});
    reader.take("retries", out.retries, {"0", "20"});
    reader.take("gap", out.gap, {"0 s", "10 s"});
    reader.take("longest_line", out.longestLine, {"16", "1048576"});
    if (const TomlNode* checksum = reader.table("checksum")) {
      using Kind = Checksum::Kind;
      TableReader inner(*checksum, "checksum", diagnostics_);
      inner.choose("kind", out.checksum.kind,
                   {{"none", Kind::none},
                    {"sum8", Kind::sum8},
                    {"xor8", Kind::xor8},
                    {"crc16-modbus", Kind::crc16_modbus},
                    {"crc16-ccitt-false", Kind::crc16_ccitt_false}});
      inner.take("separator", out.checksum.separator);
      if (!inner.has("kind")) inner.neededEntry("kind", "\"xor8\"");
      inner.finish();
    }
    reader.finish();
  }

  void readIdentify(const TomlNode& table) {
    const ExchangeRule rule{{}, {}, {"model", "serial", "version", "skip"}, {"model"}};
    Identify out;
    TableReader reader(table, "[identify]", diagnostics_);
    readAskAndAnswer(reader, rule, out.exchange);
    reader.take("model", out.model);
    reader.finish();
    profile_.identify = std::move(out);
  }

  void readError(const TomlNode& table) {
    TableReader reader(table, "[[error]]", diagnostics_);
    std::string pattern;
    if (reader.need("pattern", pattern, {}, "\"ERR {code} {text}\"")) {
      ErrorAnswer out;
      out.pattern = templateOf(reader.entry("pattern")->value, {"code", "text", "skip"});
      const bool anything = std::ranges::none_of(
          out.pattern.segments, [](const Segment& s) { return s.kind == Segment::Kind::literal; });
      if (anything)
        diagnostics_.error(out.pattern.place,
                           "this error pattern has no fixed text, so every answer is an error",
                           "write what error answers have in common: \"ERR {code}\"");
      profile_.errors.push_back(std::move(out));
    }
    reader.finish();
  }

  void readInputs(const TomlNode& table) {
    Inputs out;
    out.place = table.place;
    TableReader reader(table, "[inputs]", diagnostics_);
    reader.need("count", out.count, {"1", "4096"}, "16");
    reader.take("first", out.first, {"0", "65535"});
    reader.choose("gives", out.gives,
                  {{"V/V", ValueUnit::volt_per_volt},
                   {"mV/V", ValueUnit::millivolt_per_volt},
                   {"uV/V", ValueUnit::microvolt_per_volt}});
    if (!reader.has("gives")) reader.neededEntry("gives", "\"mV/V\"");
    reader.takeList("saturated", out.saturated);
    reader.takeList("missing", out.missing);
    reader.need("full_scale", out.fullScale, {"0.01 mV/V", "1 V/V"}, "\"4 mV/V\"");
    reader.take("resolution", out.resolution, {"0.000000001 mV/V", "1 mV/V"});
    reader.take("input_resistance", out.inputResistance, {"1 kohm", "1000 Gohm"});
    for (const TomlNode* completion : reader.tables("completions"))
      out.completions.push_back(readToleranced(*completion, "a completion resistor"));
    if (const TomlNode* half = reader.table("half_bridge"))
      out.halfBridge = readToleranced(*half, "\"half_bridge\"");
    takeChoices(reader, "excitations", "[\"5 V\"]", out.excitations, {"0.1 V", "50 V"});
    takeChoices(reader, "rates", "[\"10 Hz\", \"100 Hz\"]", out.rates, {"0.01 Hz", "1 MHz"});
    reader.take("zero_offset", out.zeroOffset, {"0 mV/V", ""});
    reader.take("zero_stability", out.zeroStability, {"0 mV/V", ""});
    reader.take("filter_time_constant", out.filterTimeConstant, {"0 s", "60 s"});

    const Fields range = {"first", "last"};
    out.read = exchangeIn(reader, "read", {range, {}, {"values", "first", "last", "skip"}, {"values"}});
    if (const TomlNode* stream = reader.table("stream")) readStream(*stream, out);
    out.setRate = exchangeIn(reader, "set_rate", {{"rate"}, {"rate"}, {"rate", "skip"}, {}});
    out.setExcitation =
        exchangeIn(reader, "set_excitation", {{"excitation"}, {"excitation"}, {"excitation", "skip"}, {}});
    reader.finish();
    if (!reader.has("read") && !reader.has("stream"))
      diagnostics_.error(reader.place(), "[inputs] does not say how values are read",
                         "add [inputs.read] for a polled amplifier or [inputs.stream] for a streaming one");
    profile_.inputs = std::move(out);
  }

  void readStream(const TomlNode& table, Inputs& out) {
    TableReader reader(table, "[inputs.stream]", diagnostics_);
    out.streamStart = exchangeIn(reader, "start", {{"rate"}, {}, {"rate", "skip"}, {}});
    out.streamStop = exchangeIn(reader, "stop", {{}, {}, {"skip"}, {}});
    if (!reader.has("start")) reader.neededEntry("start", "\"START\"");
    if (!reader.has("stop")) reader.neededEntry("stop", "\"STOP\"");
    reader.take("counter_bits", out.counterBits, {"1", "32"});
    std::string line;
    if (reader.need("line", line, {}, "\"DATA {counter},{values:,}\"")) {
      const TomlNode& node = reader.entry("line")->value;
      out.streamLine = templateOf(node, {"counter", "values", "skip"});
      wantFields(*out.streamLine, {"values"});
      noNeighbours(*out.streamLine);
      const bool counts = out.streamLine->hasField("counter");
      if (counts && out.counterBits == 0 && !reader.has("counter_bits"))
        diagnostics_.error(
            node.place, "the line has a {counter}, but \"counter_bits\" is not given",
            "add how many bits wide it is, that is after how many lines it wraps: counter_bits = 16");
      if (!counts && reader.has("counter_bits"))
        diagnostics_.error(reader.entry("counter_bits")->place,
                           "\"counter_bits\" is given, but the line has no {counter}",
                           "add {counter} to \"line\" or take \"counter_bits\" out");
    }
    reader.finish();
  }

  void readRelays(const TomlNode& table) {
    Relays out;
    out.place = table.place;
    TableReader reader(table, "[relays]", diagnostics_);
    reader.need("count", out.count, {"1", "4096"}, "32");
    reader.take("first", out.first, {"0", "65535"});
    reader.take("operate_time", out.operateTime, {"0 s", "5 s"});
    reader.take("release_time", out.releaseTime, {"0 s", "5 s"});
    reader.take("contact_resistance", out.contactResistance, {"0 ohm", "100 ohm"});
    reader.take("leakage", out.leakage, {"1 Mohm", ""});
    reader.take("contact_tolerance", out.contactTolerance, {"0 ohm", "100 ohm"});
    if (out.contactTolerance > out.contactResistance)
      diagnostics_.error(
          (reader.has("contact_tolerance") ? reader.entry("contact_tolerance")->value.place : reader.place()),
          "the contact tolerance is larger than the contact resistance, which would go below 0",
          "give the middle of the range as \"contact_resistance\" and half its width as the tolerance");
    reader.take("latching", out.latching);

    const ExchangeRule one{{"relay"}, {"relay"}, {"relay", "skip"}, {}};
    for (auto [key, exchange] : {std::pair("close", &out.close), std::pair("open", &out.open)}) {
      if (auto read = exchangeIn(reader, key, one)) *exchange = std::move(*read);
      if (!reader.has(key))
        reader.neededEntry(key, "{ ask = \"" + std::string(key) + " {relay}\", answer = \"OK\" }");
    }
    out.openAll = exchangeIn(reader, "open_all", {{}, {}, {"skip"}, {}});
    if (const TomlNode* state = reader.table("state")) {
      const ExchangeRule rule{{"relay"}, {"relay"}, {"relay", "state", "skip"}, {"state"}};
      TableReader inner(*state, "[relays.state]", diagnostics_);
      Exchange exchange;
      readAskAndAnswer(inner, rule, exchange);
      inner.take("closed", out.closedWord);
      inner.take("open", out.openWord);
      if (out.closedWord == out.openWord)
        diagnostics_.error(inner.place(), "a closed and an open relay answer with the same word",
                           "give two different words as \"closed\" and \"open\"");
      inner.finish();
      out.state = std::move(exchange);
    }
    reader.finish();
    profile_.relays = std::move(out);
  }

  Toleranced readToleranced(const TomlNode& table, const std::string& what) {
    Toleranced out;
    TableReader reader(table, what, diagnostics_);
    reader.need("value", out.value, {"1 ohm", "1 Mohm"}, "\"120 ohm\"");
    reader.need("tolerance", out.tolerance, {"0 %", "20 %"}, "\"0.1 %\"");
    reader.finish();
    return out;
  }

  template <class Quantity>
  void takeChoices(TableReader& reader, std::string_view key, std::string_view example,
                   std::vector<Quantity>& out, Bounds bounds) {
    if (!reader.has(key)) {
      reader.neededEntry(key, example);
    } else if (reader.takeList(key, out, bounds) && out.empty()) {
      diagnostics_.error(reader.entry(key)->value.place, '"' + std::string(key) + "\" is empty",
                         "give at least one: " + std::string(key) + " = " + std::string(example));
    }
  }

  /// `key = "REQUEST"` or `key = { ask = "REQUEST", answer = "OK" }`.
  std::optional<Exchange> exchangeIn(TableReader& reader, std::string_view key, const ExchangeRule& rule) {
    const TomlEntry* entry = reader.entry(key);
    if (!entry) return {};
    Exchange out;
    if (entry->value.type == TomlNode::Type::text) {
      out.place = entry->value.place;
      out.ask = templateOf(entry->value, rule.askFields);
      wantFields(out.ask, rule.neededInAsk);
      if (!rule.neededInAnswer.empty())
        diagnostics_.error(
            entry->value.place, '"' + std::string(key) + "\" does not say what the answer looks like",
            "write { ask = \"...\", answer = \"{" + std::string(rule.neededInAnswer.front()) + "}\" }");
      return out;
    }
    if (!reader.isA(TomlNode::Type::table, *entry)) return {};
    TableReader inner(entry->value, '"' + std::string(key) + '"', diagnostics_);
    readAskAndAnswer(inner, rule, out);
    inner.finish();
    return out;
  }

  void readAskAndAnswer(TableReader& reader, const ExchangeRule& rule, Exchange& out) {
    out.place = reader.place();
    std::string text;
    if (reader.need("ask", text, {}, "\"ID?\"")) {
      out.ask = templateOf(reader.entry("ask")->value, rule.askFields);
      wantFields(out.ask, rule.neededInAsk);
    }
    if (!rule.neededInAnswer.empty() && !reader.has("answer")) {
      reader.neededEntry("answer", "\"{" + std::string(rule.neededInAnswer.front()) + "}\"");
    } else if (reader.take("answer", text)) {
      out.answer = templateOf(reader.entry("answer")->value, rule.answerFields);
      wantFields(*out.answer, rule.neededInAnswer);
      noNeighbours(*out.answer);
    }
  }

  TextTemplate templateOf(const TomlNode& node, const Fields& allowed) {
    TextTemplate out = parseTemplate(node.text, node.place, allowed, diagnostics_);
    std::set<std::string_view> seen;
    for (const Segment& segment : out.segments)
      if (segment.kind != Segment::Kind::literal && segment.text != "skip" &&
          !seen.insert(segment.text).second)
        diagnostics_.error(out.place,
                           "the field {" + segment.text + "} stands twice in \"" + out.source + '"',
                           "use {skip} for text that does not matter");
    return out;
  }

  void wantFields(const TextTemplate& text, const Fields& needed) {
    for (const std::string_view field : needed)
      if (!text.hasField(field))
        diagnostics_.error(
            text.place, '"' + text.source + "\" lacks the field {" + std::string(field) + "}",
            "put {" + std::string(field) + (field == "values" ? ":,}" : "}") + " where it stands");
  }

  /// In what is received two fields need some text between them, or nobody can tell where one ends.
  void noNeighbours(const TextTemplate& text) {
    for (std::size_t i = 1; i < text.segments.size(); ++i) {
      const Segment& left = text.segments[i - 1];
      const Segment& right = text.segments[i];
      const bool fields = left.kind != Segment::Kind::literal && right.kind != Segment::Kind::literal;
      if (fields && left.width == 0)
        diagnostics_.error(text.place,
                           "{" + left.text + "} and {" + right.text + "} in \"" + text.source +
                               "\" have nothing between them",
                           "put the separating text between them, or give the first a width");
    }
  }

  TableReader root_;
  Diagnostics& diagnostics_;
  Profile profile_;
};

}  // namespace

Profile readProfile(const TomlNode& root, const std::string& file, Diagnostics& diagnostics) {
  return ProfileReader(root, file, diagnostics).read();
}

}  // namespace shuntwright::description
