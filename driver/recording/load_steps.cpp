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
    if (event.continued && current) continue;
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

using Sums = std::vector<std::vector<Running>>;  ///< steps x channels

Result<void> addRows(const Reader& reader, std::size_t device, const std::vector<LoadStep>& steps, Sums& sums) {
  const std::size_t columns = reader.devices()[device].channels.size();
  for (std::uint64_t first = 0; first < reader.rows(device); first += kRowsAtATime) {
    auto rows = reader.read(device, first, std::min(kRowsAtATime, reader.rows(device) - first));
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
  return {};
}

}  // namespace

Result<std::vector<LoadStep>> loadSteps(std::span<const std::unique_ptr<Reader>> parts) {
  std::vector<RecordedEvent> events;
  for (const auto& part : parts) events.insert(events.end(), part->events().begin(), part->events().end());
  std::vector<LoadStep> steps = holdsOf(events);
  if (parts.empty()) return steps;
  for (std::size_t d = 0; d < parts.front()->devices().size(); ++d) {
    const auto& device = parts.front()->devices()[d];
    Sums sums(steps.size(), std::vector<Running>(device.channels.size()));
    for (const auto& part : parts) {
      if (auto added = addRows(*part, d, steps, sums); !added) return std::unexpected(std::move(added.error()));
    }
    for (std::size_t s = 0; s < steps.size(); ++s) {
      for (std::size_t k = 0; k < device.channels.size(); ++k) {
        const auto& sum = sums[s][k];
        steps[s].channels.push_back({device.channels[k].name, device.channels[k].unit, sum.mean, sum.deviation(), sum.n});
      }
    }
  }
  return steps;
}

}  // namespace shuntwright::recording
