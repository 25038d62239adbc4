#pragma once

#include <map>
#include <optional>
#include <string>
#include <string_view>

#include "driver/description/profile.h"

namespace shuntwright::sim {

/// Texts of the fields of a line, by name.
using FieldTexts = std::map<std::string, std::string, std::less<>>;

/// Reads a request: whether the line has the template's form. Fields of requests hold no lists.
std::optional<FieldTexts> readLine(const description::TextTemplate& form, std::string_view line);

/// Writes an answer. Decimal and hexadecimal fields take whole numbers as decimal text; a list its items already
/// joined. A field without a text is left empty.
std::string writeLine(const description::TextTemplate& form, const FieldTexts& fields);

/// The line with its check sum, as the profile's framing wants it (no terminator).
std::string sealed(const description::Checksum& checksum, std::string line);
/// The line without its check sum, or nothing when that is wrong or missing.
std::optional<std::string_view> unsealed(const description::Checksum& checksum, std::string_view line);

}  // namespace shuntwright::sim
