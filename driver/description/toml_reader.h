#pragma once

#include <chrono>
#include <cstdint>
#include <initializer_list>
#include <optional>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/description/diagnostics.h"
#include "driver/description/quantity_text.h"
#include "driver/units/units.h"

/// Reading of TOML files with every mistake located. Used for profiles, racks and fault scenarios:
///
///     auto root = parseToml(text, file, diagnostics);          // a syntax error is reported alone
///     if (!root) return {};
///     TableReader table(*root, "the scenario", diagnostics);
///     table.need("name", out.name);                            // missing: reported at the table
///     table.take("delay", out.delay, {"0 s", "10 s"});         // keeps out.delay when absent or wrong
///     table.choose("kind", out.kind, {{"silent", Kind::silent}, {"garbage", Kind::garbage}});
///     table.finish();                                          // keys nobody asked for: reported
namespace shuntwright::description {

struct TomlEntry;

/// One value of a TOML file with its place. A plain copy: the parser's own types stay in one source file.
struct TomlNode {
  enum class Type { table, array, text, integer, number, boolean, date };
  Type type = Type::table;
  Place place;
  std::string text;
  std::int64_t integer = 0;
  double number = 0;  ///< of integers too
  bool boolean = false;
  std::vector<TomlNode> items;     ///< of an array
  std::vector<TomlEntry> entries;  ///< of a table, in the order of the file

  const TomlEntry* find(std::string_view key) const;
};

struct TomlEntry {
  std::string key;
  Place place;             ///< of the key
  bool inherited = false;  ///< merged in from a table of defaults
  TomlNode value;
};

/// The whole file as a table, or nothing after a syntax error. Keeps the text in `diagnostics`. Refuses files
/// over 4 MiB, non-ASCII outside strings and comments, keys of more than 16 parts, brackets deeper than 32.
std::optional<TomlNode> parseToml(std::string_view text, const std::string& file, Diagnostics& diagnostics);

/// Adds what `table` lacks from `defaults`, key by key and tables within tables; marks it inherited.
void mergeDefaults(TomlNode& table, const TomlNode& defaults);

/// "a string", "an array", ...
std::string_view name(TomlNode::Type type);

/// What a number must lie between, both ends included, written as in a file: {"0.1 ohm", "10 Gohm"} or
/// {"1", "4096"}. An empty end is open.
struct Bounds {
  std::string_view low = {};
  std::string_view high = {};
};

// One value. Each returns true and sets `out`, or reports what is wrong and leaves `out` alone; `what` names
// the value in the message: "\"tolerance\"".
bool decode(const TomlNode& node, const std::string& what, std::string& out, Bounds, Diagnostics&);
bool decode(const TomlNode& node, const std::string& what, bool& out, Bounds, Diagnostics&);
bool decode(const TomlNode& node, const std::string& what, int& out, Bounds, Diagnostics&);
bool decode(const TomlNode& node, const std::string& what, double& out, Bounds, Diagnostics&);
bool decode(const TomlNode& node, const std::string& what, Nanoseconds& out, Bounds, Diagnostics&);
bool decode(const TomlNode& node, const std::string& what, units::Temperature& out, Bounds, Diagnostics&);
bool decode(const TomlNode& node, const std::string& what, units::GaugeFactor& out, Bounds, Diagnostics&);
bool decode(const TomlNode& node, const std::string& what, std::chrono::year_month_day& out, Bounds,
            Diagnostics&);  ///< a string "2026-05-31" (ISO 8601)
bool decodeQuantity(const TomlNode& node, const std::string& what, const QuantityWords&, double& base, Bounds,
                    Diagnostics&);

template <class Kind>
bool decode(const TomlNode& node, const std::string& what, units::Quantity<Kind>& out, Bounds bounds,
            Diagnostics& diagnostics) {
  double base = 0;
  if (!decodeQuantity(node, what, wordsOf<Kind>(), base, bounds, diagnostics)) return false;
  out = units::Quantity<Kind>::of(base, units::Unit<Kind>{1});
  return true;
}

template <class T>
bool decode(const TomlNode& node, const std::string& what, std::optional<T>& out, Bounds bounds,
            Diagnostics& diagnostics) {
  T value{};
  if (!decode(node, what, value, bounds, diagnostics)) return false;
  out = std::move(value);
  return true;
}

/// Reads one table and remembers which keys were asked for.
class TableReader {
 public:
  /// @param what names the table in messages: "channel \"S01\"", "[inputs]". `table` must outlive this.
  TableReader(const TomlNode& table, std::string what, Diagnostics& diagnostics)
      : table_(table), what_(std::move(what)), diagnostics_(diagnostics) {}

  const Place& place() const { return table_.place; }
  const std::string& what() const { return what_; }

  /// The entry of a key, or null; from here on the key is known.
  const TomlEntry* entry(std::string_view key);
  /// The same, and reported at the table when absent.
  const TomlEntry* neededEntry(std::string_view key, std::string_view example = {});
  bool has(std::string_view key) { return entry(key) != nullptr; }

  /// An optional value. True: it is there and good.
  template <class T>
  bool take(std::string_view key, T& out, Bounds bounds = {}) {
    const TomlEntry* found = entry(key);
    return found && decode(found->value, quotedKey(key), out, bounds, diagnostics_);
  }

  /// A required value.
  template <class T>
  bool need(std::string_view key, T& out, Bounds bounds = {}, std::string_view example = {}) {
    const TomlEntry* found = neededEntry(key, example);
    return found && decode(found->value, quotedKey(key), out, bounds, diagnostics_);
  }

  /// An array of values; every item is checked.
  template <class T>
  bool takeList(std::string_view key, std::vector<T>& out, Bounds bounds = {}) {
    const TomlEntry* found = entry(key);
    if (!found || !isA(TomlNode::Type::array, *found)) return false;
    std::vector<T> list;
    bool good = true;
    for (const TomlNode& item : found->value.items) {
      T value{};
      if (decode(item, "an item of " + quotedKey(key), value, bounds, diagnostics_))
        list.push_back(std::move(value));
      else
        good = false;
    }
    if (good) out = std::move(list);
    return good;
  }

  /// One word of a list.
  template <class Enum>
  bool choose(std::string_view key, Enum& out,
              std::initializer_list<std::pair<std::string_view, Enum>> choices) {
    std::vector<std::string_view> words;
    for (const auto& choice : choices) words.push_back(choice.first);
    const int index = chosen(key, words);
    if (index < 0) return false;
    out = (choices.begin() + index)->second;
    return true;
  }

  /// A sub-table, or null when absent or no table (which is reported).
  const TomlNode* table(std::string_view key);
  /// The tables of an array of tables ([[key]] or [{...}, ...]).
  std::vector<const TomlNode*> tables(std::string_view key);

  /// Reports every key that nobody asked for, with the nearest that somebody did.
  void finish();

  bool isA(TomlNode::Type type, const TomlEntry& entry);  ///< or reported

 private:
  static std::string quotedKey(std::string_view key) { return '"' + std::string(key) + '"'; }
  int chosen(std::string_view key, const std::vector<std::string_view>& words);

  const TomlNode& table_;
  std::string what_;
  Diagnostics& diagnostics_;
  std::vector<std::string> known_;
};

/// "a, b or c", each in quotes.
std::string oneOf(const std::vector<std::string_view>& words);

/// "did you mean \"x\"?" with the nearest of the candidates, or "known: a, b" when none is near; empty when
/// there are no candidates.
std::string suggestion(std::string_view word, const std::vector<std::string_view>& candidates);

}  // namespace shuntwright::description
