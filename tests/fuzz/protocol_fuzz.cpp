// Any bytes at all from a device of any shipped profile: no crash, and the same meanings however they are
// cut. First byte: which profile; second: which of its requests waits for an answer; third: how the bytes are
// cut.
#include <cstddef>
#include <cstdint>
#include <cstdlib>
#include <filesystem>
#include <string>
#include <vector>

#include "driver/description/load.h"
#include "driver/protocol/text_dialect.h"

namespace {

using namespace shuntwright;
using Profiles = std::vector<std::shared_ptr<const description::Profile>>;

Profiles loadProfiles() {
  Profiles out;
  std::vector<std::string> files;
  for (const char* folder : {"amplifiers", "relays"}) {
    const auto path = std::filesystem::path(SHUNTWRIGHT_SOURCE_DIR) / "profiles" / folder;
    for (const auto& entry : std::filesystem::directory_iterator(path)) {
      if (entry.path().extension() == ".toml") files.push_back(entry.path().string());
    }
  }
  std::sort(files.begin(), files.end());
  for (const auto& file : files) {
    description::Diagnostics diagnostics;
    auto profile = description::loadProfile(file, description::diskReader(), diagnostics);
    if (!profile) std::abort();
    out.push_back(std::make_shared<const description::Profile>(std::move(*profile)));
  }
  if (out.empty()) std::abort();
  return out;
}

std::vector<protocol::Request> requestsOf(const description::Profile& profile,
                                          const protocol::TextDialect& dialect) {
  const std::vector<protocol::Value> values{
      {"relay", 3LL}, {"first", 1LL}, {"last", 16LL}, {"rate", 100.0}, {"excitation", 5.0}};
  std::vector<protocol::Request> out;
  const auto add = [&](const description::Exchange& exchange) {
    if (auto request = dialect.request(exchange, values)) out.push_back(std::move(*request));
  };
  if (profile.identify) add(profile.identify->exchange);
  if (profile.inputs) {
    for (const auto* exchange :
         {&profile.inputs->read, &profile.inputs->streamStart, &profile.inputs->setRate}) {
      if (*exchange) add(**exchange);
    }
  }
  if (profile.relays) {
    add(profile.relays->close);
    if (profile.relays->state) add(*profile.relays->state);
  }
  return out;
}

/// Everything that is to be the same however the bytes are cut.
std::string meaning(protocol::TextDialect& dialect, const protocol::Request* pending,
                    const std::vector<std::string_view>& pieces) {
  std::vector<float> ratio(dialect.inputs());
  std::vector<std::uint8_t> flags(dialect.inputs());
  protocol::LineSplitter splitter = dialect.splitter();
  std::string out;
  for (const auto piece : pieces) {
    splitter.feed(bytesOf(piece), [&](const protocol::LineSplitter::Line& line) {
      bool echo = true;
      const std::string_view text = pending ? dialect.withoutEcho(line.text, *pending, echo) : line.text;
      const auto incoming = dialect.classify(text, pending, ratio, flags);
      out += std::to_string(static_cast<int>(incoming.kind)) + ' ' + std::to_string(incoming.counter) + ' ' +
             std::to_string(line.droppedBytes) + ' ' + incoming.problem + incoming.code + incoming.text +
             '\n';
      if (incoming.kind == protocol::Incoming::Kind::answer) {
        for (const auto& field : dialect.fields().all()) out += std::string(field.text) + '|';
        (void)dialect.values(ratio, flags);
      }
      if (incoming.kind == protocol::Incoming::Kind::stream) {
        for (const float value : ratio) out += std::to_string(value) + ',';
      }
    });
  }
  return out + std::string(splitter.partial());
}

}  // namespace

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
  static const Profiles profiles = loadProfiles();
  if (size < 3) return 0;
  const auto& profile = profiles[data[0] % profiles.size()];
  protocol::TextDialect dialect(profile);
  const auto requests = requestsOf(*profile, dialect);
  const std::size_t choice = data[1] % (requests.size() + 1);
  const protocol::Request* pending = choice < requests.size() ? &requests[choice] : nullptr;
  const std::string_view bytes(reinterpret_cast<const char*>(data) + 3, size - 3);

  const std::size_t step = 1 + data[2] % 7;
  std::vector<std::string_view> cut;
  for (std::size_t at = 0; at < bytes.size(); at += step) cut.push_back(bytes.substr(at, step));
  if (meaning(dialect, pending, {bytes}) != meaning(dialect, pending, cut)) std::abort();
  return 0;
}
