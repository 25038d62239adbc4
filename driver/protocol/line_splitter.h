#pragma once

#include <cstddef>
#include <cstdint>
#include <functional>
#include <string>
#include <string_view>

#include "driver/core/bytes.h"

namespace shuntwright::protocol {

/// Turns a stream of bytes into lines, however the bytes are cut into pieces.
///
/// A line ends with `terminator` (one or more characters), which is taken off. A line longer than `longest`
/// bytes is reported with what was dropped, and reading goes on after its terminator.
///     LineSplitter split("\r\n", 4096);
///     split.feed(bytes, [](const LineSplitter::Line& line) { ... });
/// No I/O, one thread. A line's text is valid only during the call; whole lines within one piece are not
/// copied.
class LineSplitter {
 public:
  struct Line {
    std::string_view text;  ///< without the terminator; of an over-long line the beginning
    std::size_t droppedBytes =
        0;  ///< more than 0: the line was too long and this many bytes are not in `text`
  };

  LineSplitter(std::string terminator, std::size_t longest);

  template <class Sink>
  void feed(ByteView bytes, Sink&& sink);

  /// The beginning of a line whose end has not come yet.
  std::string_view partial() const { return emitted_ ? std::string_view() : partial_; }
  /// Forgets that beginning and gives how many bytes it had.
  std::size_t dropPartial();

 private:
  /// Takes bytes up to and with the next terminator from the front of `rest`; false when it does not come.
  bool take(std::string_view& rest, Line& line);
  bool finish(Line& line);

  std::string terminator_;
  std::size_t longest_;
  std::string partial_;
  std::size_t dropped_ = 0;  ///< bytes of the present over-long line that were not kept
  bool emitted_ = false;     ///< partial_ still holds the line given out last
};

template <class Sink>
void LineSplitter::feed(ByteView bytes, Sink&& sink) {
  std::string_view rest = textOf(bytes);
  Line line;
  while (take(rest, line)) sink(line);
}

}  // namespace shuntwright::protocol
