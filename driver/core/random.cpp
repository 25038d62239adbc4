#include "driver/core/random.h"

#include <bit>
#include <cmath>

namespace shuntwright {
namespace {

std::uint64_t splitmix(std::uint64_t& x) {
  x += 0x9e3779b97f4a7c15u;
  std::uint64_t z = x;
  z = (z ^ (z >> 30)) * 0xbf58476d1ce4e5b9u;
  z = (z ^ (z >> 27)) * 0x94d049bb133111ebu;
  return z ^ (z >> 31);
}

}  // namespace

Random::Random(std::uint64_t seed) : seed_(seed) {
  std::uint64_t x = seed;
  for (auto& word : state_) word = splitmix(x);
}

Random Random::fork(std::uint64_t stream) const {
  std::uint64_t x = seed_ ^ (stream * 0xd1342543de82ef95u + 0x632be59bd9b4e019u);
  return Random(splitmix(x));
}

std::uint64_t Random::bits() {
  auto& s = state_;
  const std::uint64_t result = std::rotl(s[0] + s[3], 23) + s[0];
  const std::uint64_t t = s[1] << 17;
  s[2] ^= s[0];
  s[3] ^= s[1];
  s[1] ^= s[2];
  s[0] ^= s[3];
  s[2] ^= t;
  s[3] = std::rotl(s[3], 45);
  return result;
}

double Random::uniform() { return static_cast<double>(bits() >> 11) * 0x1.0p-53; }

double Random::uniform(double low, double high) { return low + (high - low) * uniform(); }

double Random::normal() {
  if (hasSpare_) {
    hasSpare_ = false;
    return spare_;
  }
  double u, v, s;
  do {
    u = 2 * uniform() - 1;
    v = 2 * uniform() - 1;
    s = u * u + v * v;
  } while (s >= 1 || s == 0);
  const double scale = std::sqrt(-2 * std::log(s) / s);
  spare_ = v * scale;
  hasSpare_ = true;
  return u * scale;
}

std::uint64_t Random::below(std::uint64_t count) {
  // Rejection keeps every value equally likely.
  const std::uint64_t limit = ~std::uint64_t{0} - (~std::uint64_t{0} % count + 1) % count;
  std::uint64_t x;
  do x = bits();
  while (x > limit);
  return x % count;
}

}  // namespace shuntwright
