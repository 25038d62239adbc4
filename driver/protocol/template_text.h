#pragma once

#include <span>
#include <string>
#include <string_view>
#include <variant>
#include <vector>

#include "driver/core/error.h"
#include "driver/description/text_template.h"

namespace shuntwright::protocol {

/// A value to put into a request: {relay}, {first}, {rate}.
struct Value {
  std::string_view name;
  std::variant<long long, double, std::string_view> value;
};

/// Writes a template with its fields filled in. Numbers take the shortest decimal form, or what the field's
/// width and base say. Errors: bad_use when a field has no value or a value does not suit its field.
Result<std::string> render(const description::TextTemplate& text, std::span<const Value> values);

/// What a template found in a line. Views point into the line, and into the template.
class Fields {
 public:
  struct Field {
    const description::Segment* segment;
    std::string_view text;
  };

  /// The field's text, or an empty view when the template has no such field.
  std::string_view operator[](std::string_view name) const;
  const Field* find(std::string_view name) const;
  const std::vector<Field>& all() const { return fields_; }

  void clear() { fields_.clear(); }
  void add(const description::Segment& segment, std::string_view text) {
    fields_.push_back({&segment, text});
  }

 private:
  std::vector<Field> fields_;
};

/// Whether the whole line has the template's form; fills `fields`, which can be used again and again without
/// allocating. A field takes the shortest text up to the next literal, the last one the rest of the line;
/// decimal and hexadecimal fields take digits only. Lists are not looked into.
bool match(const description::TextTemplate& text, std::string_view line, Fields& fields);
bool match(const description::TextTemplate&& text, std::string_view line, Fields& fields) = delete;

}  // namespace shuntwright::protocol
