#include "driver/description/toml_reader.h"

#include <algorithm>
#include <charconv>
#include <cmath>

namespace shuntwright::description {
namespace {

std::string inQuotes(std::string_view text) {
  return '"' + std::string(text) + '"';
}

std::string between(Bounds bounds) {
  if (bounds.low.empty()) return "at most " + std::string(bounds.high);
  if (bounds.high.empty()) return "at least " + std::string(bounds.low);
  return "between " + std::string(bounds.low) + " and " + std::string(bounds.high);
}

/// Ends of a range are written by us, never by the user: what cannot be read counts as open.
template <class Read>
bool inside(double value, Bounds bounds, const Read& read) {
  const auto low = bounds.low.empty() ? std::nullopt : read(bounds.low);
  const auto high = bounds.high.empty() ? std::nullopt : read(bounds.high);
  constexpr double kRounding = 1e-12;  // "0.3 %" of a file and of a bound are the same number, nearly
  if (low && value < *low - kRounding * std::abs(*low)) return false;
  return !high || value <= *high + kRounding * std::abs(*high);
}

std::optional<double> plainNumber(std::string_view text) {
  double value = 0;
  const auto [end, problem] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (problem != std::errc()) return {};
  return value;
}

bool wrongType(const TomlNode& node, const std::string& what, std::string_view wanted, std::string remedy,
               Diagnostics& diagnostics) {
  diagnostics.error(node.place,
                    what + " must be " + std::string(wanted) + ", not " + std::string(name(node.type)),
                    std::move(remedy));
  return false;
}

bool outside(const TomlNode& node, const std::string& what, const std::string& written, Bounds bounds,
             Diagnostics& diagnostics) {
  diagnostics.error(node.place, what + " is out of range: " + written, "it must be " + between(bounds));
  return false;
}

std::string numberText(double value) {
  char text[32];
  const auto result = std::to_chars(text, text + sizeof text, value);
  return {text, result.ptr};
}

}  // namespace

const TomlEntry* TomlNode::find(std::string_view key) const {
  const auto found = std::ranges::find(entries, key, &TomlEntry::key);
  return found == entries.end() ? nullptr : &*found;
}

std::string_view name(TomlNode::Type type) {
  switch (type) {
    case TomlNode::Type::table:
      return "a table";
    case TomlNode::Type::array:
      return "an array";
    case TomlNode::Type::text:
      return "a string";
    case TomlNode::Type::integer:
      return "a whole number";
    case TomlNode::Type::number:
      return "a number";
    case TomlNode::Type::boolean:
      return "true or false";
    case TomlNode::Type::date:
      return "a date or time";
  }
  return "";
}

namespace {

void markInherited(TomlEntry& entry) {
  entry.inherited = true;
  for (TomlEntry& inner : entry.value.entries) markInherited(inner);
}

}  // namespace

void mergeDefaults(TomlNode& table, const TomlNode& defaults) {
  for (const TomlEntry& fallback : defaults.entries) {
    const auto own = std::ranges::find(table.entries, fallback.key, &TomlEntry::key);
    if (own == table.entries.end()) {
      table.entries.push_back(fallback);
      markInherited(table.entries.back());
    } else if (own->value.type == TomlNode::Type::table && fallback.value.type == TomlNode::Type::table) {
      mergeDefaults(own->value, fallback.value);
    }
  }
}

bool decode(const TomlNode& node, const std::string& what, std::string& out, Bounds,
            Diagnostics& diagnostics) {
  if (node.type != TomlNode::Type::text)
    return wrongType(node, what, "a string", "put it in double quotes", diagnostics);
  out = node.text;
  return true;
}

bool decode(const TomlNode& node, const std::string& what, std::chrono::year_month_day& out, Bounds,
            Diagnostics& diagnostics) {
  const std::string remedy = "write year, month and day in double quotes: \"2026-05-31\"";
  if (node.type != TomlNode::Type::text) return wrongType(node, what, "a date", remedy, diagnostics);
  const std::string& text = node.text;
  bool good = text.size() == 10 && text[4] == '-' && text[7] == '-';
  const auto number = [&](std::size_t from, std::size_t digits) {
    int value = 0;
    for (std::size_t i = from; good && i < from + digits; ++i) {
      good = text[i] >= '0' && text[i] <= '9';
      value = 10 * value + (text[i] - '0');
    }
    return value;
  };
  const std::chrono::year_month_day day(std::chrono::year(number(0, 4)),
                                        std::chrono::month(static_cast<unsigned>(number(5, 2))),
                                        std::chrono::day(static_cast<unsigned>(number(8, 2))));
  if (!good || !day.ok()) {
    diagnostics.error(node.place, what + " is no date: \"" + text + '"', remedy);
    return false;
  }
  out = day;
  return true;
}

bool decode(const TomlNode& node, const std::string& what, bool& out, Bounds, Diagnostics& diagnostics) {
  if (node.type != TomlNode::Type::boolean)
    return wrongType(node, what, "true or false", "write true or false without quotes", diagnostics);
  out = node.boolean;
  return true;
}

bool decode(const TomlNode& node, const std::string& what, int& out, Bounds bounds,
            Diagnostics& diagnostics) {
  if (node.type != TomlNode::Type::integer)
    return wrongType(node, what, "a whole number", "write a whole number without quotes", diagnostics);
  if (bounds.low.empty()) bounds.low = "-2147483648";
  if (bounds.high.empty()) bounds.high = "2147483647";
  if (!inside(node.number, bounds, plainNumber))
    return outside(node, what, std::to_string(node.integer), bounds, diagnostics);
  out = static_cast<int>(node.integer);
  return true;
}

bool decode(const TomlNode& node, const std::string& what, double& out, Bounds bounds,
            Diagnostics& diagnostics) {
  if (node.type != TomlNode::Type::number && node.type != TomlNode::Type::integer)
    return wrongType(node, what, "a number", "write a number without quotes and without a unit", diagnostics);
  if (!std::isfinite(node.number)) {
    diagnostics.error(node.place, what + " must be a finite number");
    return false;
  }
  if (!inside(node.number, bounds, plainNumber))
    return outside(node, what, numberText(node.number), bounds, diagnostics);
  out = node.number;
  return true;
}

bool decodeQuantity(const TomlNode& node, const std::string& what, const QuantityWords& words, double& base,
                    Bounds bounds, Diagnostics& diagnostics) {
  if (node.type == TomlNode::Type::integer || node.type == TomlNode::Type::number) {
    const std::string meant = std::isfinite(node.number)
                                  ? numberText(node.number) + ' ' + std::string(words.units.front().name)
                                  : std::string(words.example);
    diagnostics.error(node.place, what + " needs a unit",
                      "write " + inQuotes(meant) + " if that is what it is");
    return false;
  }
  if (node.type != TomlNode::Type::text)
    return wrongType(node, what, "a string with a number and a unit",
                     "write it like " + inQuotes(words.example), diagnostics);
  const auto value = parseQuantity(node.text, words);
  if (!value) {
    diagnostics.error(node.place, what + ": " + value.error().message, value.error().remedy);
    return false;
  }
  const auto read = [&](std::string_view text) -> std::optional<double> {
    const auto bound = parseQuantity(text, words);
    return bound ? std::optional(*bound) : std::nullopt;
  };
  if (!inside(*value, bounds, read)) return outside(node, what, inQuotes(node.text), bounds, diagnostics);
  base = *value;
  return true;
}

bool decode(const TomlNode& node, const std::string& what, Nanoseconds& out, Bounds bounds,
            Diagnostics& diagnostics) {
  if (bounds.low.empty()) bounds.low = "0 s";
  if (bounds.high.empty()) bounds.high = "24 h";
  double base = 0;
  if (!decodeQuantity(node, what, durationWords(), base, bounds, diagnostics)) return false;
  out = Nanoseconds(std::llround(base * 1e9));
  return true;
}

bool decode(const TomlNode& node, const std::string& what, units::Temperature& out, Bounds bounds,
            Diagnostics& diagnostics) {
  double base = 0;
  if (!decodeQuantity(node, what, temperatureWords(), base, bounds, diagnostics)) return false;
  out = units::Temperature::celsius(base);
  return true;
}

bool decode(const TomlNode& node, const std::string& what, units::GaugeFactor& out, Bounds bounds,
            Diagnostics& diagnostics) {
  double value = 0;
  if (!decode(node, what, value, bounds, diagnostics)) return false;
  out = units::GaugeFactor(value);
  return true;
}

const TomlEntry* TableReader::entry(std::string_view key) {
  if (std::ranges::find(known_, key) == known_.end()) known_.emplace_back(key);
  return table_.find(key);
}

const TomlEntry* TableReader::neededEntry(std::string_view key, std::string_view example) {
  const TomlEntry* found = entry(key);
  if (!found)
    diagnostics_.error(table_.place, quotedKey(key) + " is missing from " + what_,
                       "add it" + (example.empty() ? std::string()
                                                   : ": " + std::string(key) + " = " + std::string(example)));
  return found;
}

bool TableReader::isA(TomlNode::Type type, const TomlEntry& found) {
  if (found.value.type == type) return true;
  return wrongType(found.value, quotedKey(found.key), name(type), {}, diagnostics_);
}

int TableReader::chosen(std::string_view key, const std::vector<std::string_view>& words) {
  std::string word;
  if (!take(key, word)) return -1;
  const auto found = std::ranges::find(words, word);
  if (found != words.end()) return static_cast<int>(found - words.begin());
  const std::string_view near = nearest(word, words);
  diagnostics_.error(entry(key)->value.place, quotedKey(key) + " cannot be " + inQuotes(word),
                     near.empty() ? "it must be " + oneOf(words) : "did you mean " + inQuotes(near) + "?");
  return -1;
}

const TomlNode* TableReader::table(std::string_view key) {
  const TomlEntry* found = entry(key);
  return found && isA(TomlNode::Type::table, *found) ? &found->value : nullptr;
}

std::vector<const TomlNode*> TableReader::tables(std::string_view key) {
  std::vector<const TomlNode*> out;
  const TomlEntry* found = entry(key);
  if (!found) return out;
  if (found->value.type == TomlNode::Type::table) {
    diagnostics_.error(found->value.place, quotedKey(key) + " is a list of tables",
                       "write [[" + std::string(key) + "]] with double brackets");
    return out;
  }
  if (!isA(TomlNode::Type::array, *found)) return out;
  for (const TomlNode& item : found->value.items) {
    if (item.type == TomlNode::Type::table)
      out.push_back(&item);
    else
      wrongType(item, "an item of " + quotedKey(key), "a table", {}, diagnostics_);
  }
  return out;
}

void TableReader::finish() {
  const std::vector<std::string_view> known(known_.begin(), known_.end());
  for (const TomlEntry& found : table_.entries) {
    if (std::ranges::find(known_, found.key) != known_.end()) continue;
    diagnostics_.error(
        found.place,
        "unknown key " + inQuotes(found.key) + " in " + (found.inherited ? "the defaults" : what_),
        suggestion(found.key, known));
  }
}

std::string oneOf(const std::vector<std::string_view>& words) {
  std::string out;
  for (std::size_t i = 0; i < words.size(); ++i) {
    if (i > 0) out += i + 1 == words.size() ? " or " : ", ";
    out += inQuotes(words[i]);
  }
  return out;
}

std::string suggestion(std::string_view word, const std::vector<std::string_view>& candidates) {
  if (candidates.empty()) return {};
  const std::string_view near = nearest(word, candidates);
  if (!near.empty()) return "did you mean " + inQuotes(near) + "?";
  std::string known;
  for (const std::string_view candidate : candidates)
    known += (known.empty() ? "" : ", ") + std::string(candidate);
  return "known here: " + known;
}

}  // namespace shuntwright::description
