#pragma once

#include <iosfwd>
#include <string>
#include <string_view>
#include <vector>

#include "driver/core/error.h"

namespace shuntwright::cli {

/// Exit codes of every command.
inline constexpr int kPassed = 0;
inline constexpr int kFailedLimits = 1;
inline constexpr int kBadUse = 2;
inline constexpr int kDeviceFailure = 3;

int exitCodeFor(ErrorCode code);

/// Where a command prints, and how.
struct Console {
  std::ostream& out;  ///< results: a table, or one JSON document
  std::ostream& err;  ///< progress, problems, log
  bool json = false;
  bool outIsTerminal = false;
  bool errIsTerminal = false;
  bool interactive = false;  ///< somebody can answer a question
  bool colour = false;

  /// Prints an error in the one form and gives its exit code.
  int fail(const Error& error) const;
  std::string bold(std::string_view text) const;
  std::string good(std::string_view text) const;
  std::string bad(std::string_view text) const;
  std::string dim(std::string_view text) const;

  /// One line on a terminal that the next one overwrites; nothing in a pipe.
  void progress(double part, std::string_view text) const;
  void endProgress() const;
};

/// From the process: standard streams, terminals, NO_COLOR.
Console processConsole();

/// A table whose columns are as wide as they need. Widths count characters as a terminal shows them.
class Table {
 public:
  enum class Align { left, right };
  struct Column {
    std::string title;
    Align align = Align::right;
  };
  explicit Table(std::vector<Column> columns) : columns_(std::move(columns)) {}
  void row(std::vector<std::string> cells) { rows_.push_back(std::move(cells)); }
  void print(const Console& console) const;

 private:
  std::vector<Column> columns_;
  std::vector<std::vector<std::string>> rows_;
};

/// Fixed decimals; "-" for what is not a number.
std::string fixed(double value, int decimals);
/// Terminal cells of UTF-8 text without escape sequences (one a code point).
std::size_t cells(std::string_view text);

}  // namespace shuntwright::cli
