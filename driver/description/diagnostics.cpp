#include "driver/description/diagnostics.h"

#include <algorithm>
#include <cctype>
#include <cstdint>
#include <tuple>

namespace shuntwright::description {
namespace {

/// Length of the UTF-8 sequence that starts with this byte; 1 for anything malformed.
std::size_t sequenceLength(unsigned char lead) {
  if (lead >= 0xF0 && lead < 0xF8) return 4;
  if (lead >= 0xE0 && lead < 0xF0) return 3;
  if (lead >= 0xC2 && lead < 0xE0) return 2;
  return 1;
}

char32_t decode(std::string_view bytes) {
  const auto lead = static_cast<unsigned char>(bytes[0]);
  if (bytes.size() == 1) return lead;
  char32_t code = lead & (0xFFu >> (bytes.size() + 1));
  for (const char c : bytes.substr(1)) code = (code << 6) | (static_cast<unsigned char>(c) & 0x3Fu);
  return code;
}

/// Columns a terminal takes for a character: 2 for East Asian wide ones and pictographs, 0 for combining
/// ones. A short table rather than wcwidth(), which depends on the locale.
int terminalWidth(char32_t c) {
  constexpr std::pair<char32_t, char32_t> kCombining[] = {{0x300, 0x36F}, {0x200B, 0x200F}, {0xFE00, 0xFE0F}};
  constexpr std::pair<char32_t, char32_t> kWide[] = {
      {0x1100, 0x115F}, {0x2E80, 0xA4CF}, {0xAC00, 0xD7A3},   {0xF900, 0xFAFF},  {0xFE30, 0xFE6F},
      {0xFF00, 0xFF60}, {0xFFE0, 0xFFE6}, {0x1F300, 0x1FAFF}, {0x20000, 0x3FFFD}};
  const auto in = [c](const auto& range) { return c >= range.first && c <= range.second; };
  if (std::ranges::any_of(kCombining, in)) return 0;
  return std::ranges::any_of(kWide, in) ? 2 : 1;
}

struct Line {
  std::string shown;  ///< printable: control characters replaced
  std::string blank;  ///< as wide as what stands before the column
};

Line layOut(std::string_view line, int column) {
  Line out;
  int position = 1;
  for (std::size_t i = 0; i < line.size(); ++position) {
    const std::size_t length = std::min(sequenceLength(static_cast<unsigned char>(line[i])), line.size() - i);
    const std::string_view bytes = line.substr(i, length);
    const char32_t c = decode(bytes);
    const bool control = (c < 0x20 && c != '\t') || (c >= 0x7F && c < 0xA0);
    out.shown += control ? "?" : std::string(bytes);
    if (position < column) out.blank += c == '\t' ? "\t" : std::string(control ? 1 : terminalWidth(c), ' ');
    i += length;
  }
  return out;
}

std::string_view lineOf(std::string_view text, int number) {
  for (; number > 1; --number) {
    const auto end = text.find('\n');
    if (end == std::string_view::npos) return {};
    text.remove_prefix(end + 1);
  }
  text = text.substr(0, text.find('\n'));
  if (text.ends_with('\r')) text.remove_suffix(1);
  return text;
}

char folded(char c) {
  return static_cast<char>(std::tolower(static_cast<unsigned char>(c)));
}

/// Optimal string alignment: insertions, deletions, substitutions and swaps of neighbours.
std::size_t distance(std::string_view a, std::string_view b) {
  std::vector<std::size_t> before(b.size() + 1), above(b.size() + 1), row(b.size() + 1);
  for (std::size_t j = 0; j <= b.size(); ++j) above[j] = j;
  for (std::size_t i = 1; i <= a.size(); ++i) {
    row[0] = i;
    for (std::size_t j = 1; j <= b.size(); ++j) {
      const std::size_t same = folded(a[i - 1]) == folded(b[j - 1]) ? 0 : 1;
      row[j] = std::min({above[j] + 1, row[j - 1] + 1, above[j - 1] + same});
      const bool swapped =
          i > 1 && j > 1 && folded(a[i - 1]) == folded(b[j - 2]) && folded(a[i - 2]) == folded(b[j - 1]);
      if (swapped) row[j] = std::min(row[j], before[j - 2] + 1);
    }
    before.swap(above);
    above.swap(row);
  }
  return above[b.size()];
}

}  // namespace

void Diagnostics::error(Place place, std::string message, std::string remedy) {
  add({Severity::error, std::move(place), std::move(message), std::move(remedy)});
}

void Diagnostics::warning(Place place, std::string message, std::string remedy) {
  add({Severity::warning, std::move(place), std::move(message), std::move(remedy)});
}

void Diagnostics::add(Problem problem) {
  // What stands once in a file is said once, however many channels inherit it.
  if (said_.insert(problem.place.text() + ' ' + problem.message).second)
    problems_.push_back(std::move(problem));
}

void Diagnostics::keepText(std::string file, std::string text) {
  texts_.emplace_back(std::move(file), std::move(text));
}

void Diagnostics::sortByPlace() {
  const auto order = [this](const std::string& file) {
    return std::ranges::find(texts_, file, &std::pair<std::string, std::string>::first) - texts_.begin();
  };
  std::vector<std::tuple<std::ptrdiff_t, int, int, std::size_t>> keys;  // the index keeps equals in order
  for (const Problem& p : problems_)
    keys.emplace_back(order(p.place.file), p.place.line, p.place.column, keys.size());
  std::ranges::sort(keys);
  std::vector<Problem> sorted;
  for (const auto& key : keys) sorted.push_back(std::move(problems_[std::get<3>(key)]));
  problems_ = std::move(sorted);
}

bool Diagnostics::ok() const {
  return std::ranges::none_of(problems_, [](const Problem& p) { return p.severity == Severity::error; });
}

std::string Diagnostics::render(bool colour) const {
  const auto paint = [colour](std::string_view code, std::string_view text) {
    return colour ? "\x1b[" + std::string(code) + "m" + std::string(text) + "\x1b[0m" : std::string(text);
  };
  std::string out;
  for (const Problem& problem : problems_) {
    const bool isError = problem.severity == Severity::error;
    const std::string at = problem.place.text();
    if (!at.empty()) out += paint("1", at + ":") + ' ';
    out += paint(isError ? "1;31" : "1;35", isError ? "error:" : "warning:") + ' ';
    out += paint("1", problem.message) + '\n';

    const auto text =
        std::ranges::find(texts_, problem.place.file, &std::pair<std::string, std::string>::first);
    if (text != texts_.end() && problem.place.line > 0) {
      const Line line = layOut(lineOf(text->second, problem.place.line), problem.place.column);
      std::string number = std::to_string(problem.place.line);
      number.insert(0, number.size() < 4 ? 4 - number.size() : 0, ' ');
      out += number + " | " + line.shown + '\n';
      if (problem.place.column > 0)
        out += std::string(number.size(), ' ') + " | " + line.blank + paint("1;32", "^") + '\n';
    }
    if (!problem.remedy.empty()) out += "  = " + paint("1", "help:") + ' ' + problem.remedy + '\n';
  }
  return out;
}

std::string_view nearest(std::string_view word, const std::vector<std::string_view>& candidates) {
  constexpr std::size_t kLongestWord = 64;  // a longer one is no misspelling, and the distance is quadratic
  if (word.empty() || word.size() > kLongestWord) return {};
  std::string_view best;
  std::size_t least = std::max<std::size_t>(1, word.size() / 3) + 1;
  for (const std::string_view candidate : candidates) {
    if (candidate.size() > kLongestWord) continue;
    const std::size_t d = distance(word, candidate);
    if (d < least) {
      least = d;
      best = candidate;
    }
  }
  return best;
}

}  // namespace shuntwright::description
