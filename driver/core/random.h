#pragma once

#include <cstdint>

namespace shuntwright {

/// Seeded random source (xoshiro256++ by Blackman and Vigna, seeded through splitmix64). Passed in
/// wherever chance is needed, so that a run repeats from its seed on every machine and compiler.
class Random {
 public:
  explicit Random(std::uint64_t seed);

  /// An independent stream for a named part ("lead 3 of S07"), whatever was drawn from this one.
  Random fork(std::uint64_t stream) const;

  std::uint64_t bits();
  double uniform();                          ///< [0, 1)
  double uniform(double low, double high);   ///< [low, high)
  double normal();                           ///< mean 0, standard deviation 1 (polar method)
  std::uint64_t below(std::uint64_t count);  ///< 0 .. count-1; count > 0

 private:
  std::uint64_t seed_;
  std::uint64_t state_[4];
  double spare_ = 0;
  bool hasSpare_ = false;
};

}  // namespace shuntwright
