#include "driver/protocol/line_splitter.h"

#include <algorithm>

namespace shuntwright::protocol {

LineSplitter::LineSplitter(std::string terminator, std::size_t longest)
    : terminator_(terminator.empty() ? std::string("\n") : std::move(terminator)), longest_(longest) {}

bool LineSplitter::take(std::string_view& rest, Line& line) {
  if (emitted_) {
    partial_.clear();
    dropped_ = 0;
    emitted_ = false;
  }
  if (rest.empty()) return false;

  // The common case: the whole line lies in this piece, and nothing is copied.
  if (partial_.empty()) {
    const std::size_t end = rest.find(terminator_);
    if (end != std::string_view::npos) {
      const std::size_t kept = std::min(end, longest_);
      line = {rest.substr(0, kept), end - kept};
      rest.remove_prefix(end + terminator_.size());
      return true;
    }
  }

  // A terminator may begin in what is kept already and end in `rest`.
  const std::size_t before = partial_.size();
  const std::size_t overlap = std::min(before, terminator_.size() - 1);
  std::size_t used = rest.size();
  bool ended = false;
  {
    std::string seam(partial_, before - overlap);
    seam.append(rest.substr(0, terminator_.size() - 1));
    if (const std::size_t at = seam.find(terminator_); overlap > 0 && at != std::string::npos) {
      used = at + terminator_.size() - overlap;
      ended = true;
    } else if (const std::size_t later = rest.find(terminator_); later != std::string_view::npos) {
      used = later + terminator_.size();
      ended = true;
    }
  }
  partial_.append(rest.substr(0, used));
  rest.remove_prefix(used);
  if (ended) return finish(line);

  // Too long already: keep the beginning for the report and the last bytes, which may begin a terminator.
  const std::size_t tail = terminator_.size() - 1;
  if (partial_.size() > longest_ + tail) {
    const std::size_t excess = partial_.size() - longest_ - tail;
    partial_.erase(longest_, excess);
    dropped_ += excess;
  }
  return false;
}

bool LineSplitter::finish(Line& line) {
  partial_.resize(partial_.size() - terminator_.size());
  if (partial_.size() > longest_) {
    dropped_ += partial_.size() - longest_;
    partial_.resize(longest_);
  }
  line = {partial_, dropped_};
  emitted_ = true;
  return true;
}

std::size_t LineSplitter::dropPartial() {
  const std::size_t had = emitted_ ? 0 : partial_.size() + dropped_;
  partial_.clear();
  dropped_ = 0;
  emitted_ = false;
  return had;
}

}  // namespace shuntwright::protocol
