#pragma once

#include <string>
#include <string_view>
#include <vector>

namespace shuntwright::test {

/// Calls `check(pieces)` with the bytes cut at every place into two, and byte by byte: what a decoder makes
/// of them must not depend on how they arrive.
template <class Check>
void everySplit(const std::string& bytes, Check&& check) {
  check(std::vector<std::string>{bytes});
  for (std::size_t cut = 0; cut <= bytes.size(); ++cut) {
    check(std::vector<std::string>{bytes.substr(0, cut), bytes.substr(cut)});
  }
  std::vector<std::string> single;
  for (const char c : bytes) single.emplace_back(1, c);
  check(single);
}

/// Calls `check(damaged)` with every byte left out, every bit of every byte flipped, and every beginning.
template <class Check>
void everyDamage(const std::string& bytes, Check&& check) {
  for (std::size_t at = 0; at < bytes.size(); ++at) {
    check(bytes.substr(0, at) + bytes.substr(at + 1));
    check(bytes.substr(0, at));
    for (int bit = 0; bit < 8; ++bit) {
      std::string flipped = bytes;
      flipped[at] = static_cast<char>(flipped[at] ^ (1 << bit));
      check(flipped);
    }
  }
}

}  // namespace shuntwright::test
