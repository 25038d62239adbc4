#include "driver/rack/relay_journal.h"

#include <fcntl.h>
#include <unistd.h>

#include <cerrno>
#include <charconv>
#include <cstdio>
#include <cstring>
#include <filesystem>
#include <fstream>
#include <functional>
#include <sstream>

namespace shuntwright::rack {

using description::RelayRef;

std::string stateName(const std::string& folder, const description::Rack& rack) {
  std::error_code ec;
  const auto path = std::filesystem::weakly_canonical(rack.file, ec).string();
  char hash[24];
  std::snprintf(hash, sizeof hash, "-%08zx", std::hash<std::string>{}(path) & 0xffffffffu);
  return folder + "/" + rack.name + hash;
}

std::string journalPath(const std::string& folder, const description::Rack& rack) {
  return stateName(folder, rack) + ".relays";
}

std::string text(const RelayRef& relay) { return relay.device + "/" + std::to_string(relay.relay); }

Result<void> MemoryJournal::closing(const RelayRef& relay, Instant) {
  closed_.insert(relay);
  return {};
}

Result<void> MemoryJournal::opened(const RelayRef& relay, Instant) {
  closed_.erase(relay);
  return {};
}

namespace {

/// "device/number" at the end of its last slash; device names hold none.
bool parseRelay(const std::string& word, RelayRef& out) {
  const auto slash = word.rfind('/');
  if (slash == std::string::npos) return false;
  out.device = word.substr(0, slash);
  const char* end = word.data() + word.size();
  const auto parsed = std::from_chars(word.data() + slash + 1, end, out.relay);
  return parsed.ec == std::errc() && parsed.ptr == end && !out.device.empty();
}

}  // namespace

Result<std::unique_ptr<FileJournal>> FileJournal::open(const std::string& path) {
  std::set<RelayRef> closed;
  bool torn = false;
  {
    std::ifstream in(path);
    std::string lineText;
    while (std::getline(in, lineText)) {
      if (in.eof()) {
        torn = true;
        break;
      }
      std::istringstream words(lineText);
      std::string word, relayWord;
      RelayRef relay;
      if (!(words >> word >> relayWord) || !parseRelay(relayWord, relay)) continue;
      if (word == "closing") closed.insert(relay);
      if (word == "opened") closed.erase(relay);
    }
  }
  std::error_code ec;
  std::filesystem::create_directories(std::filesystem::path(path).parent_path(), ec);
  const int descriptor = ::open(path.c_str(), O_WRONLY | O_CREAT | O_APPEND | O_CLOEXEC, 0644);
  if (descriptor < 0) {
    return fail(ErrorCode::io, "cannot write the relay journal: " + std::string(std::strerror(errno)), path,
                "no relay is closed without it; make the folder writable or set XDG_STATE_HOME");
  }
  std::unique_ptr<FileJournal> journal(new FileJournal(path, descriptor));
  journal->torn_ = torn;
  journal->closed_ = std::move(closed);
  return journal;
}

FileJournal::~FileJournal() { ::close(descriptor_); }

Result<void> FileJournal::line(const char* word, const RelayRef& relay, Instant when) {
  // A line that was cut off must not swallow this one.
  const std::string entry =
      std::string(torn_ ? "\n" : "") + word + " " + text(relay) + " " + rfc3339(when) + "\n";
  const auto written = ::write(descriptor_, entry.data(), entry.size());
  torn_ = written != static_cast<ssize_t>(entry.size());
  if (torn_ || ::fdatasync(descriptor_) != 0) {
    return fail(ErrorCode::io, "cannot write the relay journal: " + std::string(std::strerror(errno)), path_,
                "free some space; no relay is closed without the journal");
  }
  return {};
}

Result<void> FileJournal::closing(const RelayRef& relay, Instant when) {
  if (auto written = line("closing", relay, when); !written) return written;
  closed_.insert(relay);
  return {};
}

Result<void> FileJournal::opened(const RelayRef& relay, Instant when) {
  closed_.erase(relay);
  if (closed_.empty()) {
    if (::ftruncate(descriptor_, 0) == 0) {
      torn_ = false;
      return {};
    }
  }
  return line("opened", relay, when);
}

}  // namespace shuntwright::rack
