#include "driver/correction/kernel.h"

#include <algorithm>

namespace shuntwright::correction {

Kernel::Kernel(std::span<const Coefficients> columns) : inputs_(columns.size()) {
  const std::size_t times = inputs_ == 0 ? 0 : (kTile + inputs_ - 1) / inputs_;
  tiled_ = inputs_ * times;
  p_ = std::make_unique<float[]>(tiled_);
  c_ = std::make_unique<float[]>(tiled_);
  w_ = std::make_unique<float[]>(tiled_);
  for (std::size_t k = 0; k < tiled_; ++k) {
    p_[k] = columns[k % inputs_].p;
    c_[k] = columns[k % inputs_].c;
    w_[k] = columns[k % inputs_].w;
  }
  if (std::ranges::all_of(columns, [](const Coefficients& k) { return k.bend == std::array<float, 4>{}; })) return;
  for (std::size_t b = 0; b < bend_.size(); ++b) {
    bend_[b] = std::make_unique<float[]>(tiled_);
    for (std::size_t k = 0; k < tiled_; ++k) bend_[b][k] = columns[k % inputs_].bend[b];
  }
}

namespace {

/// One stretch of up to a tile. Kept on its own so that the compiler sees nothing else and vectorises it.
void stretch(const float* __restrict r, float* __restrict out, const float* __restrict p, const float* __restrict c,
             const float* __restrict w, std::size_t count) {
  for (std::size_t k = 0; k < count; ++k) out[k] = p[k] * (r[k] - c[k]) / (1.0f + w[k] * r[k]);
}

/// What remains to be done to u where columns are bent.
void bent(float* __restrict out, const float* __restrict b2, const float* __restrict b3, const float* __restrict b4,
          const float* __restrict b5, std::size_t count) {
  for (std::size_t k = 0; k < count; ++k) {
    const float u = out[k];
    out[k] = u + u * u * (b2[k] + u * (b3[k] + u * (b4[k] + u * b5[k])));
  }
}

}  // namespace

void Kernel::apply(const float* ratio, float* out, std::size_t frames) const {
  const std::size_t total = frames * inputs_;
  for (std::size_t at = 0; at < total; at += tiled_) {
    const std::size_t count = total - at < tiled_ ? total - at : tiled_;
    stretch(ratio + at, out + at, p_.get(), c_.get(), w_.get(), count);
    if (bend_[0]) bent(out + at, bend_[0].get(), bend_[1].get(), bend_[2].get(), bend_[3].get(), count);
  }
}

void applyReference(std::span<const Coefficients> columns, const float* ratio, double* out, std::size_t frames) {
  for (std::size_t f = 0; f < frames; ++f) {
    for (std::size_t k = 0; k < columns.size(); ++k) {
      const double r = ratio[f * columns.size() + k];
      const auto& at = columns[k];
      const double u =
          static_cast<double>(at.p) * (r - static_cast<double>(at.c)) / (1 + static_cast<double>(at.w) * r);
      double further = 0;
      for (std::size_t b = at.bend.size(); b-- > 0;) further = further * u + static_cast<double>(at.bend[b]);
      out[f * columns.size() + k] = u + u * u * further;
    }
  }
}

}  // namespace shuntwright::correction
