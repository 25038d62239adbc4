#include "driver/rack/open_all_script.h"

#include <algorithm>
#include <array>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <charconv>
#include <chrono>
#include <sstream>

#include "driver/protocol/text_dialect.h"

namespace shuntwright::rack {

using description::Exchange;
using description::Rack;
using description::SerialSettings;

namespace {

std::string settingsText(const SerialSettings& s) {
  static constexpr const char* kParity[] = {"none", "even", "odd"};
  static constexpr const char* kFlow[] = {"none", "hardware", "software"};
  std::ostringstream out;
  out << s.baud << ' ' << s.dataBits << ' ' << kParity[static_cast<int>(s.parity)] << ' ' << s.stopBits << ' '
      << kFlow[static_cast<int>(s.flow)];
  return out.str();
}

Result<void> addStep(const protocol::TextDialect& dialect, const Exchange& exchange,
                     std::span<const protocol::Value> values, Nanoseconds wait, OpenAllScript::Device& into) {
  auto request = dialect.request(exchange, values);
  if (!request) return std::unexpected(std::move(request.error()));
  into.steps.push_back({request->bytes, wait});
  return {};
}

}  // namespace

Result<OpenAllScript> compileOpenAll(const Rack& rack) {
  OpenAllScript script;
  script.rack = rack.name;
  for (const auto& described : rack.devices) {
    const auto& profile = described.profile;
    if (!profile->relays) continue;
    const auto& relays = *profile->relays;
    OpenAllScript::Device device;
    device.name = described.name;
    device.port = described.port.text;
    if (described.port.kind == description::Port::Kind::serial && profile->serial) {
      device.serialSettings = settingsText(*profile->serial);
    }
    const protocol::TextDialect dialect(profile);
    const Nanoseconds wait =
        relays.releaseTime + std::max<Nanoseconds>(profile->protocol.gap, std::chrono::milliseconds(50));
    // An empty line first: it ends a request that was cut off half-way.
    OpenAllScript::Step flush;
    append(flush.send, bytesOf(profile->protocol.requestEnd));
    flush.wait = wait;
    device.steps.push_back(std::move(flush));
    if (relays.openAll) {
      if (auto added = addStep(dialect, *relays.openAll, {}, wait, device); !added) {
        return std::unexpected(std::move(added.error()));
      }
    } else {
      for (int k = 0; k < relays.count; ++k) {
        const std::array<protocol::Value, 1> values{protocol::Value{"relay", static_cast<long long>(relays.first + k)}};
        if (auto added = addStep(dialect, relays.open, values, wait, device); !added) {
          return std::unexpected(std::move(added.error()));
        }
      }
    }
    script.devices.push_back(std::move(device));
  }
  return script;
}

std::string OpenAllScript::text() const {
  std::ostringstream out;
  out << "# open every relay of " << quoted(rack) << "\n";
  for (const auto& device : devices) {
    out << "device " << device.name << ' ' << device.port;
    if (!device.serialSettings.empty()) out << ' ' << device.serialSettings;
    out << "\n";
    for (const auto& step : device.steps) {
      out << "send " << quoted(step.send, step.send.size()) << "\n";
      out << "wait " << std::chrono::ceil<std::chrono::milliseconds>(step.wait).count() << "\n";
    }
  }
  return out.str();
}

namespace {

/// Undoes quoted(). False when the text is not in quotes or an escape is wrong.
bool unquote(std::string_view text, Bytes& out) {
  if (text.size() < 2 || text.front() != '"' || text.back() != '"') return false;
  text = text.substr(1, text.size() - 2);
  for (std::size_t i = 0; i < text.size(); ++i) {
    char c = text[i];
    if (c == '"') return false;
    if (c == '\\') {
      if (++i >= text.size()) return false;
      switch (text[i]) {
        case 'r': c = '\r'; break;
        case 'n': c = '\n'; break;
        case 't': c = '\t'; break;
        case '"': c = '"'; break;
        case '\\': c = '\\'; break;
        case 'x': {
          unsigned value = 0;
          if (i + 2 >= text.size()) return false;
          const auto parsed = std::from_chars(text.data() + i + 1, text.data() + i + 3, value, 16);
          if (parsed.ptr != text.data() + i + 3) return false;
          c = static_cast<char>(value);
          i += 2;
          break;
        }
        default: return false;
      }
    }
    out.push_back(static_cast<std::byte>(c));
  }
  return true;
}

}  // namespace

Result<OpenAllScript> parseOpenAll(std::string_view text, const std::string& file) {
  OpenAllScript script;
  std::istringstream in{std::string(text)};
  std::string line;
  int number = 0;
  const auto wrong = [&](const std::string& what) {
    return fail(ErrorCode::bad_file, what, Place{file, number, 1}.text(),
                "run `shuntwright check` on the rack and let the program write the script again");
  };
  while (std::getline(in, line)) {
    ++number;
    if (line.empty() || line[0] == '#') continue;
    const auto space = line.find(' ');
    const std::string word = line.substr(0, space);
    const std::string rest = space == std::string::npos ? "" : line.substr(space + 1);
    if (word == "device") {
      std::istringstream words(rest);
      OpenAllScript::Device device;
      if (!(words >> device.name >> device.port)) return wrong("a device line needs a name and a port");
      std::getline(words >> std::ws, device.serialSettings);
      script.devices.push_back(std::move(device));
      continue;
    }
    if (script.devices.empty()) return wrong("\"" + word + "\" stands before the first device");
    auto& steps = script.devices.back().steps;
    if (word == "send") {
      OpenAllScript::Step step;
      if (!unquote(rest, step.send)) return wrong("send needs text in quotes");
      steps.push_back(std::move(step));
    } else if (word == "wait") {
      long ms = 0;
      const auto parsed = std::from_chars(rest.data(), rest.data() + rest.size(), ms);
      if (parsed.ptr != rest.data() + rest.size() || rest.empty() || ms < 0 || steps.empty()) {
        return wrong("wait needs a number of milliseconds, after a send");
      }
      steps.back().wait = std::chrono::milliseconds(ms);
    } else {
      return wrong("unknown word \"" + word + "\"");
    }
  }
  return script;
}

Task<Result<void>> playOpenAll(const OpenAllScript::Device& device, transport::Stream& stream, Clock& clock) {
  for (const auto& step : device.steps) {
    auto sent = co_await stream.write(step.send, clock.now() + std::chrono::seconds(1));
    if (!sent) co_return std::unexpected(std::move(sent.error()));
    const Instant until = clock.now() + step.wait;
    while (clock.now() < until) {
      std::array<std::byte, 256> scrap;
      auto got = co_await stream.read(scrap, until);
      if (!got && got.error().code != ErrorCode::timeout) co_return std::unexpected(std::move(got.error()));
    }
  }
  co_return Result<void>{};
}

}  // namespace shuntwright::rack
