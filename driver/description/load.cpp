#include "driver/description/load.h"

#include <fstream>
#include <sstream>

#include "driver/description/readers.h"

namespace shuntwright::description {
namespace {

bool readOrReport(const std::string& file, const FileReader& read, std::string& text,
                  Diagnostics& diagnostics) {
  auto found = read(file);
  if (!found) {
    diagnostics.error({file, 0, 0}, "the file cannot be read", "check its path and permissions");
    return false;
  }
  text = *std::move(found);
  return true;
}

}  // namespace

FileReader diskReader() {
  return [](const std::string& path) -> std::optional<std::string> {
    std::ifstream in(path, std::ios::binary);
    std::ostringstream text;
    if (!in || !(text << in.rdbuf())) return {};  // a folder opens, but gives no bytes
    return std::move(text).str();
  };
}

std::optional<Profile> parseProfile(std::string_view text, const std::string& file,
                                    Diagnostics& diagnostics) {
  const auto root = parseToml(text, file, diagnostics);
  if (!root) return {};
  Profile profile = readProfile(*root, file, diagnostics);
  profile.text = std::string(text);
  diagnostics.sortByPlace();
  if (!diagnostics.ok()) return {};
  return profile;
}

std::optional<Profile> loadProfile(const std::string& file, const FileReader& read,
                                   Diagnostics& diagnostics) {
  std::string text;
  if (!readOrReport(file, read, text, diagnostics)) return {};
  return parseProfile(text, file, diagnostics);
}

std::optional<Rack> loadRack(const std::string& file, const FileReader& read, Diagnostics& diagnostics) {
  std::string text;
  if (!readOrReport(file, read, text, diagnostics)) return {};
  const auto root = parseToml(text, file, diagnostics);
  if (!root) return {};
  Rack rack = readRack(*root, file, read, diagnostics);
  rack.text = std::move(text);
  diagnostics.sortByPlace();
  if (!diagnostics.ok()) return {};
  return rack;
}

std::string_view kindOfFile(std::string_view text) {
  while (!text.empty()) {
    const auto end = text.find('\n');
    std::string_view line = text.substr(0, end);
    text.remove_prefix(end == std::string_view::npos ? text.size() : end + 1);
    while (!line.empty() && (line.front() == ' ' || line.front() == '\t')) line.remove_prefix(1);
    if (line.starts_with("[profile]")) return "profile";
    if (line.starts_with("[rack]")) return "rack";
  }
  return {};
}

}  // namespace shuntwright::description
