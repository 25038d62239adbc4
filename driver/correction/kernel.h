#pragma once

#include <array>
#include <cstddef>
#include <memory>
#include <span>

namespace shuntwright::correction {

/// Coefficients of one input column: u = p (r - c) / (1 + w r), the rational map with its zero taken out of the
/// numerator, so that single precision loses nothing where the reading is close to its zero. The value is
/// u + b2 u^2 + b3 u^3 + b4 u^4 + b5 u^5.
struct Coefficients {
  float p = 0;
  float c = 0;
  float w = 0;
  std::array<float, 4> bend{};  ///< b2, b3, b4, b5
};

/// Corrects whole frames: out[f][k] is the value of column k's coefficients at r[f][k]. Costs more only where
/// some column is bent.
///
/// Shapes: `ratio` and `out` are frames x inputs, row-major, V/V in, shown unit out; `columns` has one entry an
/// input. The arrays may not overlap. No allocation, no branch per sample; NaN stays NaN.
class Kernel {
 public:
  explicit Kernel(std::span<const Coefficients> columns);
  void apply(const float* ratio, float* out, std::size_t frames) const;
  std::size_t inputs() const { return inputs_; }

 private:
  static constexpr std::size_t kTile = 64;  ///< columns are repeated to at least this many, so that rows of few
                                            ///< inputs still fill the vector units
  std::size_t inputs_;
  std::size_t tiled_;  ///< a multiple of inputs_
  // Planar, so that the loop loads them side by side.
  std::unique_ptr<float[]> p_, c_, w_;
  std::array<std::unique_ptr<float[]>, 4> bend_;  ///< empty when no column is bent
};

/// The same, one sample at a time in double precision: what the kernel is tested against.
void applyReference(std::span<const Coefficients> columns, const float* ratio, double* out, std::size_t frames);

}  // namespace shuntwright::correction
