#include "driver/calibration/window.h"

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <cmath>
#include <utility>

namespace shuntwright::calibration {

namespace {

/// Straight-line fit by running sums about the first sample, so that nothing is stored or cancelled away.
class LineFit {
 public:
  void add(double x, double y) {
    if (n_ == 0) origin_ = y;
    y -= origin_;
    ++n_;
    const double dx = x - meanX_;
    meanX_ += dx / n_;
    sxx_ += dx * (x - meanX_);
    const double dy = y - meanY_;
    meanY_ += dy / n_;
    syy_ += dy * (y - meanY_);
    sxy_ += dx * (y - meanY_);
  }
  double mean() const { return origin_ + meanY_; }
  double slope() const { return sxx_ > 0 ? sxy_ / sxx_ : 0; }
  double residualDeviation() const {
    if (n_ < 3) return 0;
    const double residual = syy_ - (sxx_ > 0 ? sxy_ * sxy_ / sxx_ : 0);
    return std::sqrt(std::max(0.0, residual) / (n_ - 2));
  }

 private:
  int n_ = 0;
  double origin_ = 0, meanX_ = 0, meanY_ = 0, sxx_ = 0, syy_ = 0, sxy_ = 0;
};

}  // namespace

WindowReader::WindowReader(device::Device& amplifier, Clock& clock, units::Frequency rate)
    : amplifier_(amplifier), clock_(clock), rate_(rate) {}

Task<Result<Window>> WindowReader::take(std::size_t input, Instant notBefore, int count) {
  Window window;
  LineFit fit;
  const double due_s = count / rate_.in(units::hertz);
  const Instant deadline = std::max(notBefore, clock_.now()) + fromSeconds(3 * due_s + 2);
  int seen = 0;
  while (seen < count) {
    if (next_ >= block_.frames()) {
      auto more = co_await amplifier_.next(deadline);
      if (!more) co_return std::unexpected(std::move(more.error()));
      block_ = std::move(*more);
      next_ = 0;
      continue;
    }
    const std::size_t frame = next_++;
    if (block_.time[frame] < notBefore) continue;
    if (seen == 0) window.start = block_.time[frame];
    window.end = block_.time[frame];
    ++seen;
    const auto flags = block_.flagsAt(frame, input);
    if (flags & device::kSaturated) {
      ++window.saturated;
    } else if ((flags & device::kMissing) || !std::isfinite(block_.at(frame, input))) {
      ++window.missing;
    } else {
      ++window.samples;
      fit.add(seconds(block_.time[frame] - window.start), block_.at(frame, input));
    }
  }
  window.mean = fit.mean() * units::volt_per_volt;
  window.deviation = fit.residualDeviation() * units::volt_per_volt;
  window.drift = fit.slope() * seconds(window.end - window.start) * units::volt_per_volt;
  co_return window;
}

}  // namespace shuntwright::calibration
