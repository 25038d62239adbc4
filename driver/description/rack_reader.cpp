#include <algorithm>
#include <cctype>
#include <charconv>
#include <filesystem>
#include <memory>

#include "driver/description/readers.h"

namespace shuntwright::description {
namespace {

std::string inQuotes(std::string_view text) {
  return '"' + std::string(text) + '"';
}

/// The defaults that still make sense beside what a channel says itself: resistance for all wires alike and
/// length with awg exclude each other.
TomlNode leadDefaultsFor(const TomlNode& own, TomlNode defaults) {
  const bool each = own.find("each");
  const bool byLength = own.find("length");
  if (!each && !byLength) return defaults;
  std::erase_if(defaults.entries, [&](const TomlEntry& entry) {
    if (terminalNamed(entry.key)) return true;  // the channel speaks of all wires
    return each ? entry.key == "length" || entry.key == "awg" : entry.key == "each";
  });
  return defaults;
}

TomlNode withDefaults(TomlNode channel, TomlNode defaults) {
  const TomlEntry* own = channel.find("leads");
  const auto fallback = std::ranges::find(defaults.entries, "leads", &TomlEntry::key);
  if (own && fallback != defaults.entries.end())
    fallback->value = leadDefaultsFor(own->value, fallback->value);
  mergeDefaults(channel, defaults);
  return channel;
}

class RackReader {
 public:
  RackReader(const TomlNode& root, const std::string& file, const FileReader& read, Diagnostics& diagnostics)
      : root_(root, "a rack", diagnostics), read_(read), diagnostics_(diagnostics) {
    rack_.file = file;
  }

  Rack read() {
    readHead();
    for (const TomlNode* device : root_.tables("device")) readDevice(*device);
    readNamed("gauge", [this](const TomlEntry& entry) { readGauge(entry); });
    readNamed("resistor", [this](const TomlEntry& entry) { readResistor(entry); });
    if (const TomlNode* limits = root_.table("limits")) readLimits(*limits);
    if (const TomlNode* calibration = root_.table("calibration")) readCalibration(*calibration);
    readChannels();
    readSpots(root_, rack_, diagnostics_);
    root_.finish();
    if (!root_.has("device"))
      diagnostics_.error(root_.place(), "the rack has no devices",
                         "add a [[device]] table with name, profile and port");
    findClashes();
    return std::move(rack_);
  }

 private:
  void readHead() {
    if (!root_.has("rack")) {
      diagnostics_.error(root_.place(), "this is no rack: it has no [rack] table",
                         "begin with [rack], name = \"...\" and title = \"...\"");
      return;
    }
    const TomlNode* head = root_.table("rack");
    if (!head) return;
    TableReader reader(*head, "[rack]", diagnostics_);
    readName(reader, rack_.name, diagnostics_);
    reader.take("title", rack_.title);
    reader.finish();
  }

  void readDevice(const TomlNode& table) {
    Device out;
    out.place = table.place;
    const TomlEntry* named = table.find("name");
    TableReader reader(
        table, named && !named->value.text.empty() ? "device " + inQuotes(named->value.text) : "the device",
        diagnostics_);
    if (readName(reader, out.name, diagnostics_) && out.name.find('/') != std::string::npos)
      diagnostics_.error(named->value.place, "a device's name cannot hold \"/\"",
                         "\"/\" stands between device and relay in \"relays1/3\"");
    std::string path;
    if (reader.need("profile", path, {}, "\"../amplifiers/text_polled.toml\""))
      out.profile = profileAt(path, reader.entry("profile")->value.place);
    if (reader.need("port", out.port.text, {}, "\"tcp:127.0.0.1:5025\""))
      readPort(out, reader.entry("port")->value.place);
    reader.take("serial_number", out.serialNumber);
    if (reader.take("rate", out.rate, {"0.01 Hz", "1 MHz"}) && out.profile)
      checkRate(out, reader.entry("rate")->value.place);
    reader.finish();
    if (const Device* twin = rack_.device(out.name); twin && !out.name.empty())
      diagnostics_.error(named->value.place, "two devices are called " + inQuotes(out.name),
                         "the other one stands in line " + std::to_string(twin->place.line) + "; rename one");
    rack_.devices.push_back(std::move(out));
  }

  /// Each profile is read once, however many devices are of its kind. Null: it has errors of its own.
  std::shared_ptr<const Profile> profileAt(const std::string& path, const Place& place) {
    namespace fs = std::filesystem;
    const fs::path resolved = (fs::path(rack_.file).parent_path() / path).lexically_normal();
    const std::string file = resolved.string();
    if (const auto known = profiles_.find(file); known != profiles_.end()) return known->second;
    const auto text = read_(file);
    if (!text) {
      diagnostics_.error(
          place, "the profile " + inQuotes(path) + " cannot be read",
          "it is looked for at " + inQuotes(file) + "; paths are relative to the rack's own folder");
      return nullptr;
    }
    Diagnostics own;
    auto profile = parseProfile(*text, file, own);
    diagnostics_.keepText(file, *text);
    for (const Problem& problem : own.problems())
      (problem.severity == Severity::error)
          ? diagnostics_.error(problem.place, problem.message, problem.remedy)
          : diagnostics_.warning(problem.place, problem.message, problem.remedy);
    auto shared = profile ? std::make_shared<const Profile>(*std::move(profile)) : nullptr;
    profiles_.emplace(file, shared);
    return shared;
  }

  void readPort(Device& device, const Place& place) {
    Port& port = device.port;
    const std::string_view text = port.text;
    const auto colon = text.find(':');
    const std::string_view kind = text.substr(0, colon);
    std::string_view rest = colon == std::string_view::npos ? std::string_view() : text.substr(colon + 1);
    const std::string forms = "write \"serial:/dev/ttyUSB0\", \"tcp:127.0.0.1:5025\" or \"replay:FILE\"";
    if ((kind != "serial" && kind != "tcp" && kind != "replay") || rest.empty()) {
      diagnostics_.error(place, "the port " + inQuotes(text) + " cannot be read", forms);
      return;
    }
    if (kind != "tcp") {
      port.kind = kind == "serial" ? Port::Kind::serial : Port::Kind::replay;
      port.path = std::string(rest);
      if (kind == "serial" && device.profile && !device.profile->serial)
        diagnostics_.error(place, "the profile of " + inQuotes(device.name) + " has no [reach.serial]",
                           "give a port of a kind that the profile names");
      return;
    }
    port.kind = Port::Kind::tcp;
    if (device.profile && !device.profile->tcp)
      diagnostics_.error(place, "the profile of " + inQuotes(device.name) + " has no [reach.tcp]",
                         "give a port of a kind that the profile names");
    port.tcpPort = device.profile && device.profile->tcp ? device.profile->tcp->port : 0;
    // "host", "host:port" or "[::1]:port": a colon inside brackets belongs to the address.
    const auto last = rest.rfind(':');
    const bool hasPort = last != std::string_view::npos && rest.find(']', last) == std::string_view::npos;
    if (hasPort) {
      const std::string_view digits = rest.substr(last + 1);
      const auto [end, problem] = std::from_chars(digits.data(), digits.data() + digits.size(), port.tcpPort);
      if (problem != std::errc() || end != digits.data() + digits.size() || port.tcpPort < 1 ||
          port.tcpPort > 65535) {
        diagnostics_.error(place, inQuotes(digits) + " is no TCP port number",
                           "it must be between 1 and 65535");
        return;
      }
      rest = rest.substr(0, last);
    }
    if (rest.starts_with('[') && rest.ends_with(']')) rest = rest.substr(1, rest.size() - 2);
    if (rest.empty()) diagnostics_.error(place, "the port " + inQuotes(text) + " names no host", forms);
    port.path = std::string(rest);
  }

  void checkRate(const Device& device, const Place& place) {
    if (!device.profile->inputs) {
      diagnostics_.error(place, "device " + inQuotes(device.name) + " has no inputs, so it has no rate",
                         "take \"rate\" out");
      return;
    }
    std::string offered;
    for (const units::Frequency rate : device.profile->inputs->rates) {
      if (std::abs(rate / *device.rate - 1) < 1e-9) return;
      offered += (offered.empty() ? "" : ", ") + show(rate);
    }
    diagnostics_.error(place, "device " + inQuotes(device.name) + " has no rate of " + show(*device.rate),
                       "it offers " + offered);
  }

  /// [gauge.NAME] and [resistor.NAME]: a table of tables.
  template <class Read>
  void readNamed(std::string_view key, const Read& read) {
    const TomlNode* defaults = root_.table(std::string(key) + "_defaults");
    const TomlNode* all = root_.table(key);
    if (!all) return;
    for (TomlEntry entry : all->entries) {
      if (entry.value.type == TomlNode::Type::table) {
        if (defaults) mergeDefaults(entry.value, *defaults);
        read(entry);
      } else {
        diagnostics_.error(entry.place, inQuotes(entry.key) + " stands in [" + std::string(key) + "] itself",
                           "name the " + std::string(key) + ": [" + std::string(key) + ".NAME]");
      }
    }
  }

  void readGauge(const TomlEntry& entry) {
    GaugeSheet out;
    out.place = entry.value.place;
    out.name = entry.key;
    TableReader reader(entry.value, "gauge " + inQuotes(entry.key), diagnostics_);
    reader.need("factor", out.factor, {"0.5", "200"}, "2.08");
    reader.take("factor_tolerance", out.factorTolerance, {"0 %", "20 %"});
    reader.need("resistance", out.resistance.value, {"10 ohm", "100 kohm"}, "\"350 ohm\"");
    reader.take("resistance_tolerance", out.resistance.tolerance, {"0 %", "10 %"});
    reader.take("grid_area", out.gridArea, {"0.01 mm2", "10000 mm2"});
    reader.take("specimen", out.specimen);
    readGaugeEffects(reader, out, diagnostics_);
    reader.finish();
    rack_.gauges.emplace(out.name, std::move(out));
  }

  void readResistor(const TomlEntry& entry) {
    Resistor out;
    out.place = entry.value.place;
    out.name = entry.key;
    TableReader reader(entry.value, "resistor " + inQuotes(entry.key), diagnostics_);
    reader.need("value", out.value, {"1 ohm", "1 Gohm"}, "\"100 kohm\"");
    reader.take("tolerance", out.tolerance, {"0 %", "20 %"});
    reader.take("expanded_uncertainty", out.expandedUncertainty, {"0 %", "20 %"});
    reader.take("coverage_factor", out.coverageFactor, {"1", "10"});
    reader.take("temperature_coefficient", out.temperatureCoefficient, {"-10000 ppm/K", "10000 ppm/K"});
    reader.take("temperature_span", out.temperatureSpan, {"0 K", "100 K"});
    readTemperatures(reader, out);
    reader.take("certificate", out.certificate);
    reader.take("due", out.due);
    if (isOwn(reader.entry("expanded_uncertainty")) && !isOwn(reader.entry("tolerance")))
      out.tolerance = {};  // a certificate of its own stands above a tolerance for all
    if (!reader.has("tolerance") && !reader.has("expanded_uncertainty"))
      diagnostics_.error(
          reader.place(), reader.what() + " has neither tolerance nor expanded uncertainty",
          "add tolerance = \"0.1 %\", or expanded_uncertainty = \"0.01 %\" from its certificate");
    reader.finish();
    rack_.resistors.emplace(out.name, std::move(out));
  }

  /// The certificate's value holds at the certificate's temperature; the rack's is another.
  void readTemperatures(TableReader& reader, Resistor& out) {
    std::optional<units::Temperature> certified, here;
    reader.take("certificate_temperature", certified, {"-50 degC", "150 degC"});
    reader.take("temperature", here, {"-50 degC", "150 degC"});
    if (!certified && !here) return;
    for (const std::string_view key : {"certificate_temperature", "temperature", "temperature_coefficient"}) {
      if (reader.has(key)) continue;
      diagnostics_.error(reader.place(), reader.what() + " has temperatures, but no \"" + std::string(key) + '"',
                         "its value in the rack takes certificate_temperature, temperature and "
                         "temperature_coefficient together");
      return;
    }
    if (certified && here) out.value = out.value * (1 + (out.temperatureCoefficient * (*here - *certified)).in(units::one));
  }

  void readLimits(const TomlNode& table) {
    Limits& out = rack_.limits;
    TableReader reader(table, "[limits]", diagnostics_);
    reader.take("span_deviation", out.spanDeviation, {"0.001 %", "100 %"});
    reader.take("zero_return", out.zeroReturn, {"0.01 microstrain", "100000 microstrain"});
    reader.take("noise", out.noise, {"0.01 microstrain", "100000 microstrain"});
    reader.take("repeatability", out.repeatability, {"0.0001 %", "100 %"});
    reader.take("unbalance", out.unbalance, {"0.001 mV/V", "100 mV/V"});
    reader.take("linearity", out.linearity, {"0.0001 %", "100 %"});
    reader.take("lead_deviation", out.leadDeviation, {"0.1 %", "1000 %"});
    reader.take("guard_band", out.guardBand);
    reader.finish();
  }

  void readCalibration(const TomlNode& table) {
    CalibrationSettings& out = rack_.calibration;
    TableReader reader(table, "[calibration]", diagnostics_);
    reader.take("window_samples", out.windowSamples, {"2", "100000"});
    reader.take("repeats", out.repeats, {"1", "100"});
    reader.take("settle_limit", out.settleLimit, {"10 ms", "10 min"});
    reader.finish();
  }

  void readChannels() {
    TomlNode none;
    const TomlNode* defaults = root_.table("channel_defaults");
    for (const TomlNode* table : root_.tables("channel"))
      rack_.channels.push_back(
          readChannel(withDefaults(*table, defaults ? *defaults : none), rack_, diagnostics_));
  }

  void findClashes() {
    std::map<std::string, const Channel*> names;
    std::map<std::pair<std::string, int>, const Channel*> inputs;
    std::map<RelayRef, const Channel*> relays;
    std::map<std::string, const Device*> ports;
    for (const Device& device : rack_.devices) {
      const auto [other, first] = ports.emplace(device.port.text, &device);
      // One trace may hold several devices.
      if (!first && !device.port.text.empty() && device.port.kind != Port::Kind::replay)
        diagnostics_.error(device.place,
                           "devices " + inQuotes(other->second->name) + " and " + inQuotes(device.name) +
                               " are on the same port " + inQuotes(device.port.text),
                           "give each its own port");
    }
    for (const Channel& channel : rack_.channels) {
      const auto line = [](const Channel* other) { return "line " + std::to_string(other->place.line); };
      if (const auto [other, first] = names.emplace(channel.name, &channel); !first && !channel.name.empty())
        diagnostics_.error(channel.place, "two channels are called " + inQuotes(channel.name),
                           "the other one stands in " + line(other->second) + "; rename one");
      if (channel.device.empty()) continue;
      if (const auto [other, first] = inputs.emplace(std::pair(channel.device, channel.input), &channel);
          !first)
        diagnostics_.error(
            channel.place,
            "channels " + inQuotes(other->second->name) + " and " + inQuotes(channel.name) +
                " are both on input " + std::to_string(channel.input) + " of " + inQuotes(channel.device),
            "the other one stands in " + line(other->second) + "; each input carries one channel");
      for (const Shunt& shunt : channel.shunts) {
        if (shunt.relay.device.empty()) continue;
        if (const auto [other, first] = relays.emplace(shunt.relay, &channel); !first)
          diagnostics_.error(
              shunt.place,
              "relay " + shunt.relay.device + '/' + std::to_string(shunt.relay.relay) +
                  " switches two shunts: of " + inQuotes(other->second->name) + " and of " +
                  inQuotes(channel.name),
              "the other channel stands in " + line(other->second) + "; each relay switches one shunt");
      }
    }
  }

  TableReader root_;
  const FileReader& read_;
  Diagnostics& diagnostics_;
  Rack rack_;
  std::map<std::string, std::shared_ptr<const Profile>> profiles_;
};

}  // namespace

bool readName(TableReader& reader, std::string& out, Diagnostics& diagnostics) {
  if (!reader.need("name", out, {}, "\"...\"")) return false;
  const auto control = [](unsigned char c) { return c < 0x20 || c == 0x7F; };
  const bool bad =
      out.empty() || out.front() == ' ' || out.back() == ' ' || std::ranges::any_of(out, control);
  if (bad)
    diagnostics.error(reader.entry("name")->value.place, inQuotes(out) + " is no name",
                      "a name is not empty and has no control characters and no blanks at its ends");
  return !bad;
}

Rack readRack(const TomlNode& root, const std::string& file, const FileReader& read,
              Diagnostics& diagnostics) {
  return RackReader(root, file, read, diagnostics).read();
}

}  // namespace shuntwright::description
