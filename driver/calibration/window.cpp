#include "driver/calibration/window.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <cmath>
#include <utility>

namespace shuntwright::calibration {

void WindowBuilder::add(Instant when, float ratio, std::uint8_t flags) {
  if (seen() == 0) window_.start = when;
  window_.end = when;
  if (flags & device::kSaturated) {
    ++window_.saturated;
    return;
  }
  if ((flags & device::kMissing) || !std::isfinite(ratio)) {
    ++window_.missing;
    return;
  }
  if (window_.samples == 0) origin_ = ratio;
  const double n = ++window_.samples;
  const double x = seconds(when - window_.start), y = ratio - origin_;
  if (n > 1) successive_ += (y - previous_) * (y - previous_);
  previous_ = y;
  const double dx = x - meanX_, dy = y - meanY_;
  meanX_ += dx / n;
  meanY_ += dy / n;
  sxx_ += dx * (x - meanX_);
  syy_ += dy * (y - meanY_);
  sxy_ += dx * (y - meanY_);
}

void WindowBuilder::noteGap(const device::SampleBlock& block) {
  // A damaged line is seen as a gap of the counter, too, where there is one.
  window_.lost += static_cast<int>(std::max(block.lostBefore, block.damagedBefore));
}

Window WindowBuilder::window() const {
  Window out = window_;
  const double slope = sxx_ > 0 ? sxy_ / sxx_ : 0;
  const double residual = std::max(0.0, syy_ - slope * sxy_);
  out.mean = (origin_ + meanY_) * units::volt_per_volt;
  out.deviation = (out.samples < 3 ? 0 : std::sqrt(residual / (out.samples - 2))) * units::volt_per_volt;
  out.successive = (out.samples < 2 ? 0 : std::sqrt(successive_ / (out.samples - 1))) * units::volt_per_volt;
  out.drift = slope * seconds(out.end - out.start) * units::volt_per_volt;
  return out;
}

WindowReader::WindowReader(device::Device& amplifier, Clock& clock, units::Frequency rate)
    : amplifier_(amplifier), clock_(clock), rate_(rate) {}

Task<Result<Window>> WindowReader::take(std::size_t input, Instant notBefore, int count) {
  WindowBuilder window;
  const double due_s = count / rate_.in(units::hertz);
  const Instant deadline = std::max(notBefore, clock_.now()) + fromSeconds(3 * due_s + 2);
  while (window.seen() < count) {
    if (next_ >= block_.frames()) {
      auto more = co_await amplifier_.next(deadline);
      if (!more) co_return std::unexpected(std::move(more.error()));
      block_ = std::move(*more);
      next_ = 0;
      continue;
    }
    const std::size_t frame = next_++;
    if (block_.time[frame] < notBefore) continue;
    if (frame == 0 && window.seen() > 0) window.noteGap(block_);
    window.add(block_.time[frame], block_.at(frame, input), block_.flagsAt(frame, input));
  }
  co_return window.window();
}

}  // namespace shuntwright::calibration
