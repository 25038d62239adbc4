#include "driver/recording/load_steps.h"

#include <algorithm>
#include <cmath>
#include <optional>

namespace shuntwright::recording {

namespace {

constexpr std::uint64_t kRowsAtATime = 8192;

/// Running mean and scatter (Welford).
struct Running {
  std::uint64_t n = 0;
  double mean = 0, square = 0;
  void add(double value) {
    ++n;
    const double delta = value - mean;
    mean += delta / static_cast<double>(n);
    square += delta * (value - mean);
  }
  double deviation() const { return n > 1 ? std::sqrt(square / static_cast<double>(n - 1)) : 0; }
};

std::vector<LoadStep> holdsOf(const std::vector<RecordedEvent>& events) {
  std::vector<LoadStep> steps;
  std::optional<LoadStep> current;
  for (const auto& event : events) {
    if (event.kind == kStepBegin) {
      if (current) {
        current->end = event.when;
        steps.push_back(std::move(*current));
      }
      current.emplace();
      current->label = event.text;
      current->begin = event.when;
    } else if (event.kind == kStepEnd && current) {
      current->end = event.when;
      steps.push_back(std::move(*current));
      current.reset();
    }
  }
  if (current) {
    current->end = Instant::max();
    steps.push_back(std::move(*current));
  }
  return steps;
}

}  // namespace

Result<std::vector<LoadStep>> loadSteps(const Reader& reader) {
  std::vector<LoadStep> steps = holdsOf(reader.events());
  for (std::size_t d = 0; d < reader.devices().size(); ++d) {
    const auto& device = reader.devices()[d];
    const std::size_t columns = device.channels.size();
    std::vector<std::vector<Running>> sums(steps.size(), std::vector<Running>(columns));
    for (std::uint64_t first = 0; first < reader.rows(d); first += kRowsAtATime) {
      auto rows = reader.read(d, first, std::min(kRowsAtATime, reader.rows(d) - first));
      if (!rows) return std::unexpected(std::move(rows.error()));
      for (std::size_t r = 0; r < rows->time.size(); ++r) {
        for (std::size_t s = 0; s < steps.size(); ++s) {
          if (rows->time[r] < steps[s].begin || rows->time[r] > steps[s].end) continue;
          for (std::size_t k = 0; k < columns; ++k) {
            const float value = rows->corrected[r * columns + k];
            if (rows->flags[r * columns + k] == 0 && std::isfinite(value)) sums[s][k].add(value);
          }
        }
      }
    }
    for (std::size_t s = 0; s < steps.size(); ++s) {
      for (std::size_t k = 0; k < columns; ++k) {
        const auto& sum = sums[s][k];
        steps[s].channels.push_back({device.channels[k].name, device.channels[k].unit, sum.mean, sum.deviation(), sum.n});
      }
    }
  }
  return steps;
}

}  // namespace shuntwright::recording
