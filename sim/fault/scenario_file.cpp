#include "sim/fault/scenario_file.h"

#include <charconv>

#include "driver/description/toml_reader.h"

namespace shuntwright::sim {

using description::Diagnostics;
using description::Rack;
using description::TableReader;
using description::TomlNode;

namespace {

/// Reads the parts of a scenario; mistakes go to the diagnostics.
class ScenarioReader {
 public:
  ScenarioReader(const Rack& rack, Diagnostics& diagnostics, Scenario base)
      : rack_(rack), diagnostics_(diagnostics), scenario_(std::move(base)) {}

  Scenario read(const TomlNode& root) {
    TableReader table(root, "the scenario", diagnostics_);
    if (const auto* t = table.table("imperfections")) imperfections(*t);
    if (const auto* t = table.table("beam")) beam(*t);
    if (const auto* t = table.table("load")) load(*t);
    for (const auto* t : table.tables("gauge")) gauge(*t);
    for (const auto* t : table.tables("fault")) fault(*t);
    table.finish();
    return std::move(scenario_);
  }

 private:
  void imperfections(const TomlNode& node) {
    TableReader t(node, "[imperfections]", diagnostics_);
    auto& i = scenario_.imperfections;
    const std::pair<const char*, double*> scales[] = {{"gauges", &i.gauges},       {"completions", &i.completions},
                                                      {"leads", &i.leads},         {"resistors", &i.resistors},
                                                      {"gauge_factors", &i.gaugeFactors}, {"contacts", &i.contacts}};
    for (const auto& [key, value] : scales) t.take(key, *value, {"0", "100"});
    t.take("leads_warm", i.leadsWarm);
    units::Fraction span = i.spanTolerance * units::one;
    if (t.take("span_tolerance", span, {"0 %", "50 %"})) i.spanTolerance = span.in(units::one);
    units::Fraction shared = i.batches * units::one;
    if (t.take("gauge_batches", shared, {"0 %", "100 %"})) i.batches = shared.in(units::one);
    t.take("self_heating", i.selfHeating);
    t.take("flicker", i.flicker);
    t.take("offset", i.offset);
    t.take("drift", i.drift);
    t.take("noise", i.noise);
    t.take("mains", i.mains);
    t.take("answer_delay", i.answerDelay, {"0 s", "10 s"});
    t.take("send_every", i.sendEvery, {"0 s", "1 s"});
    t.finish();
  }

  void beam(const TomlNode& node) {
    TableReader t(node, "[beam]", diagnostics_);
    auto& b = scenario_.beam;
    t.take("span", b.span, {"1 mm", "1000 m"});
    t.take("modulus", b.modulus, {"1 MPa", "10000 GPa"});
    t.take("second_moment_m4", b.secondMoment_m4, {"1e-12", "1e3"});
    t.take("poisson", b.poisson, {"0", "0.5"});
    t.take("web_area", b.webArea, {"1 mm2", ""});
    t.take("temperature", b.temperature, {"-200 degC", "500 degC"});
    t.take("warming", b.warming, {"-300 K", "300 K"});
    t.take("warming_time", b.warmingTime, {"1 s", "100 h"});
    t.finish();
  }

  void load(const TomlNode& node) {
    TableReader t(node, "[load]", diagnostics_);
    t.take("largest", scenario_.maxLoad);
    std::vector<double> levels;
    if (t.takeList("levels", levels, {"0", "1"})) {
      if (levels.empty()) {
        diagnostics_.error(t.entry("levels")->value.place, "\"levels\" is empty", "give at least one part of the largest load");
      } else {
        scenario_.levels = std::move(levels);
      }
    }
    t.take("ramp", scenario_.ramp, {"0.1 s", "1 h"});
    t.take("hold", scenario_.hold, {"0.1 s", "1 h"});
    t.finish();
  }

  void gauge(const TomlNode& node) {
    TableReader t(node, "[[gauge]]", diagnostics_);
    std::string channel;
    GaugePlace place;
    if (t.need("channel", channel) && !rack_.channel(channel)) unknown(t, "channel", channel);
    t.need("along", place.alongBeam);
    t.need("fibre", place.fibre);
    t.take("angle", place.angle_deg, {"-180", "180"});
    t.choose("on", place.web, {{"flange", false}, {"web", true}});
    t.finish();
    scenario_.places[channel] = place;
  }

  void unknown(TableReader& t, const char* what, const std::string& name) {
    const auto* entry = t.entry(what);
    diagnostics_.error(entry ? entry->value.place : t.place(), std::string("the rack has no ") + what + " \"" + name + "\"",
                       "name one of the rack's");
  }

  std::optional<description::RelayRef> relay(TableReader& t, const char* key) {
    std::string text;
    if (!t.need(key, text)) return std::nullopt;
    const auto slash = text.rfind('/');
    description::RelayRef ref;
    const char* end = text.data() + text.size();
    if (slash != std::string::npos) {
      ref.device = text.substr(0, slash);
      const auto parsed = std::from_chars(text.data() + slash + 1, end, ref.relay);
      const auto* device = rack_.device(ref.device);
      if (parsed.ptr == end && device && device->profile->relays) {
        const auto& relays = *device->profile->relays;
        if (ref.relay >= relays.first && ref.relay < relays.first + relays.count) return ref;
      }
    }
    const auto* entry = t.entry(key);
    diagnostics_.error(entry->value.place, "the rack has no relay \"" + text + "\"", "write it like \"relays1/3\"");
    return std::nullopt;
  }

  // A fault of nobody is read to its end all the same, so that its other keys are checked and none is unknown.
  ChannelFaults* channel(TableReader& t) {
    std::string name;
    if (!t.need("channel", name)) return &nobody_;
    if (!rack_.channel(name)) {
      unknown(t, "channel", name);
      return &nobody_;
    }
    return &scenario_.channels[name];
  }

  DeviceFaults* device(TableReader& t) {
    std::string name;
    if (!t.need("device", name)) return &nowhere_;
    if (!rack_.device(name)) {
      unknown(t, "device", name);
      return &nowhere_;
    }
    return &scenario_.devices[name];
  }

  enum class What {
    relay_dead, relay_welded, relays_swapped, wrong_shunt, noisy, open_lead, saturated, bent, no_zero_return,
    mute, garbage, half_answer, error_answer, late, lost_frames, silent, unplugged
  };

  void request(TableReader& t, DeviceFault::Kind kind) {
    DeviceFaults* faults = device(t);
    DeviceFault one;
    one.kind = kind;
    t.choose("request", one.request,
             {{"identify", "identify"}, {"read", "read"}, {"stream start", "stream start"}, {"stream stop", "stream stop"},
              {"set rate", "set rate"}, {"set excitation", "set excitation"}, {"close", "close"}, {"open", "open"},
              {"open all", "open all"}, {"state", "state"}});
    t.take("from", one.from, {"1", ""});
    t.take("count", one.count, {"1", ""});
    if (kind == DeviceFault::Kind::late) t.need("delay", one.delay, {"0 s", "1 h"});
    faults->requests.push_back(one);
  }

  void fault(const TomlNode& node) {
    TableReader t(node, "[[fault]]", diagnostics_);
    What what{};
    const bool known = t.choose("what", what,
                                {{"relay dead", What::relay_dead},
                                 {"relay welded", What::relay_welded},
                                 {"relays swapped", What::relays_swapped},
                                 {"wrong shunt", What::wrong_shunt},
                                 {"noisy", What::noisy},
                                 {"open lead", What::open_lead},
                                 {"saturated", What::saturated},
                                 {"bent", What::bent},
                                 {"no zero return", What::no_zero_return},
                                 {"mute", What::mute},
                                 {"garbage", What::garbage},
                                 {"half answer", What::half_answer},
                                 {"error answer", What::error_answer},
                                 {"late", What::late},
                                 {"lost frames", What::lost_frames},
                                 {"silent", What::silent},
                                 {"unplugged", What::unplugged}});
    if (!known) {
      if (!t.has("what")) t.neededEntry("what", "what = \"relay dead\"");
      return;
    }
    switch (what) {
      case What::relay_dead:
        if (auto r = relay(t, "relay")) scenario_.dead.insert(*r);
        break;
      case What::relay_welded:
        if (auto r = relay(t, "relay")) scenario_.welded.insert(*r);
        break;
      case What::relays_swapped: {
        auto a = relay(t, "relay"), b = relay(t, "with");
        if (a && b) scenario_.swapped.emplace_back(*a, *b);
        break;
      }
      case What::wrong_shunt:
        t.need("scale", channel(t)->shuntScale, {"0.01", "100"});
        break;
      case What::noisy:
        t.need("scale", channel(t)->noiseScale, {"0", "1e6"});
        break;
      case What::open_lead:
        channel(t)->openLead = true;
        break;
      case What::saturated:
        channel(t)->saturated = true;
        break;
      case What::bent:
        t.need("per_mV_per_V", channel(t)->bend, {"-1", "1"});
        break;
      case What::no_zero_return:
        t.need("strain", channel(t)->noReturn);
        break;
      case What::mute: request(t, DeviceFault::Kind::mute); break;
      case What::garbage: request(t, DeviceFault::Kind::garbage); break;
      case What::half_answer: request(t, DeviceFault::Kind::half_answer); break;
      case What::error_answer: request(t, DeviceFault::Kind::error_answer); break;
      case What::late: request(t, DeviceFault::Kind::late); break;
      case What::lost_frames:
        t.need("part", device(t)->lostFrames, {"0", "1"});
        break;
      case What::silent:
        t.need("after", device(t)->silentAfter, {"0 s", ""});
        break;
      case What::unplugged: {
        DeviceFaults* faults = device(t);
        t.need("after", faults->unpluggedAfter, {"0 s", ""});
        t.take("lasting", faults->unpluggedFor, {"0 s", ""});
        break;
      }
    }
    t.finish();
  }

  const Rack& rack_;
  Diagnostics& diagnostics_;
  Scenario scenario_;
  ChannelFaults nobody_;
  DeviceFaults nowhere_;
};

}  // namespace

Scenario parseScenario(std::string_view text, const std::string& file, const Rack& rack, Diagnostics& diagnostics,
                       Scenario base) {
  auto root = description::parseToml(text, file, diagnostics);
  if (!root) return base;
  return ScenarioReader(rack, diagnostics, std::move(base)).read(*root);
}

}  // namespace shuntwright::sim
