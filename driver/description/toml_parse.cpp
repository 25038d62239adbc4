// The only file that sees the TOML library: text in, plain nodes out.
#include <toml++/toml.h>

#include <algorithm>
#include <cmath>
#include <tuple>

#include "driver/description/toml_reader.h"

namespace shuntwright::description {
namespace {

constexpr std::size_t kLongestText = 4u << 20;
constexpr int kDeepestKey = 16;    // a.b.c... nests tables; the parser's own limit does not see those
constexpr int kDeepestValue = 32;  // arrays and inline tables within each other

struct Mistake {
  Place place;
  std::string message;
  std::string remedy;
};

/// Walks the text before the parser sees it. Some non-ASCII characters outside strings and comments lead the
/// parser into undefined behaviour, and a long dotted key into unbounded recursion.
class Scan {
 public:
  Scan(std::string_view text, const std::string& file) : text_(text), place_{file, 1, 1} {}

  std::optional<Mistake> mistake() {
    int dots = 0;
    int depth = 0;
    while (at_ < text_.size()) {
      const char c = text_[at_];
      if (static_cast<unsigned char>(c) >= 0x80)
        return Mistake{place_, "a character that is not ASCII stands outside strings and comments",
                       "put it in double quotes, or write it with plain letters"};
      if (c == '#') {
        while (at_ < text_.size() && text_[at_] != '\n') step();
      } else if (c == '"' || c == '\'') {
        skipString(c);
      } else {
        if (c == '.' && ++dots > kDeepestKey)
          return Mistake{place_, "a key is nested too deep", "at most 16 parts joined by dots"};
        if ((c == '[' || c == '{') && ++depth > kDeepestValue)
          return Mistake{place_, "brackets are nested too deep", "at most 32 within each other"};
        if (c == ']' || c == '}') depth = std::max(depth - 1, 0);
        if (std::string_view(",=[]{}\n").find(c) != std::string_view::npos) dots = 0;
        step();
      }
    }
    return {};
  }

 private:
  void skipString(char quote) {
    const std::string triple(3, quote);
    const bool multiLine = text_.substr(at_).starts_with(triple);
    for (int i = 0; i < (multiLine ? 3 : 1); ++i) step();
    while (at_ < text_.size()) {
      const char c = text_[at_];
      if (quote == '"' && c == '\\') {
        step();
        if (at_ < text_.size()) step();
      } else if (multiLine && text_.substr(at_).starts_with(triple)) {
        // Up to two quotes may stand just before the closing three.
        while (at_ < text_.size() && text_[at_] == quote) step();
        return;
      } else if (!multiLine && (c == quote || c == '\n')) {
        if (c == quote) step();
        return;
      } else {
        step();
      }
    }
  }

  void step() {
    const auto c = static_cast<unsigned char>(text_[at_++]);
    if (c == '\n') {
      ++place_.line;
      place_.column = 1;
    } else if ((c & 0xC0u) != 0x80u) {
      ++place_.column;  // columns count code points: continuation bytes do not
    }
  }

  std::string_view text_;
  std::size_t at_ = 0;
  Place place_;
};

Place placeOf(const toml::source_region& region, const std::string& file) {
  return {file, static_cast<int>(region.begin.line), static_cast<int>(region.begin.column)};
}

TomlNode convert(const toml::node& node, const std::string& file) {
  TomlNode out;
  out.place = placeOf(node.source(), file);
  if (const auto* table = node.as_table()) {
    out.type = TomlNode::Type::table;
    for (const auto& [key, value] : *table)
      out.entries.push_back(
          {std::string(key.str()), placeOf(key.source(), file), false, convert(value, file)});
    std::ranges::sort(out.entries, {},
                      [](const TomlEntry& e) { return std::tuple(e.place.line, e.place.column); });
  } else if (const auto* array = node.as_array()) {
    out.type = TomlNode::Type::array;
    for (const auto& item : *array) out.items.push_back(convert(item, file));
  } else if (const auto* text = node.as_string()) {
    out.type = TomlNode::Type::text;
    out.text = text->get();
  } else if (const auto* integer = node.as_integer()) {
    out.type = TomlNode::Type::integer;
    out.integer = integer->get();
    out.number = static_cast<double>(out.integer);
  } else if (const auto* number = node.as_floating_point()) {
    out.type = TomlNode::Type::number;
    out.number = number->get();
  } else if (const auto* boolean = node.as_boolean()) {
    out.type = TomlNode::Type::boolean;
    out.boolean = boolean->get();
  } else {
    out.type = TomlNode::Type::date;
  }
  return out;
}

}  // namespace

std::optional<TomlNode> parseToml(std::string_view text, const std::string& file, Diagnostics& diagnostics) {
  if (text.starts_with("\xEF\xBB\xBF")) text.remove_prefix(3);  // byte order mark
  diagnostics.keepText(file, std::string(text));
  if (text.size() > kLongestText) {
    diagnostics.error({file, 0, 0}, "the file is longer than 4 MiB", "split it");
    return {};
  }
  if (const auto mistake = Scan(text, file).mistake()) {
    diagnostics.error(mistake->place, mistake->message, mistake->remedy);
    return {};
  }
  try {
    const toml::table table = toml::parse(text, std::string_view(file));
    TomlNode root = convert(table, file);
    root.place = {file, 1, 1};
    return root;
  } catch (const toml::parse_error& error) {
    diagnostics.error(placeOf(error.source(), file), "syntax: " + std::string(error.description()),
                      "mend this first; the rest of the file is checked after that");
    return {};
  }
}

}  // namespace shuntwright::description
