#pragma once

#include <cstddef>
#include <span>
#include <string>
#include <string_view>
#include <vector>

namespace shuntwright {

using Bytes = std::vector<std::byte>;
using ByteView = std::span<const std::byte>;

inline ByteView bytesOf(std::string_view text) { return std::as_bytes(std::span(text.data(), text.size())); }

inline std::string_view textOf(ByteView bytes) {
  return {reinterpret_cast<const char*>(bytes.data()), bytes.size()};
}

inline void append(Bytes& to, ByteView what) { to.insert(to.end(), what.begin(), what.end()); }

/// Printable form for messages and traces: "ID?\r\n" with quotes, escapes and, past `limit`, an ellipsis.
std::string quoted(ByteView bytes, std::size_t limit = 80);
inline std::string quoted(std::string_view text, std::size_t limit = 80) {
  return quoted(bytesOf(text), limit);
}

}  // namespace shuntwright
