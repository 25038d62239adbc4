#pragma once

#include <set>
#include <string>
#include <string_view>
#include <vector>

#include "driver/core/error.h"

namespace shuntwright::description {

enum class Severity { error, warning };

/// One thing wrong (or doubtful) in a file.
struct Problem {
  Severity severity = Severity::error;
  Place place;
  std::string message;  ///< what is wrong
  std::string remedy;   ///< how to mend it, "did you mean ..." included; may be empty
};

/// Collects everything that is wrong with the files of one run. Texts are kept so that a problem can be
/// printed with its line and a caret.
///
/// The same problem at the same place is kept once.
class Diagnostics {
 public:
  void error(Place place, std::string message, std::string remedy = {});
  void warning(Place place, std::string message, std::string remedy = {});
  void keepText(std::string file, std::string text);
  void sortByPlace();  ///< files in the order in which their texts came, then line and column

  bool ok() const;  ///< no errors; warnings do not count
  const std::vector<Problem>& problems() const { return problems_; }

  /// Every problem as a compiler would print it: "file:line:column: error: message", the line, a caret
  /// under the column (tabs and wide characters kept in step), "  = help: remedy".
  std::string render(bool colour) const;

 private:
  void add(Problem problem);

  std::vector<Problem> problems_;
  std::set<std::string> said_;
  std::vector<std::pair<std::string, std::string>> texts_;
};

/// The candidate nearest to a misspelt word (Damerau-Levenshtein distance at most a third of its length,
/// at least 1; upper and lower case count as the same), or an empty view.
std::string_view nearest(std::string_view word, const std::vector<std::string_view>& candidates);

}  // namespace shuntwright::description
