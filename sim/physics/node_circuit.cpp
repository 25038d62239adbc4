#include "sim/physics/node_circuit.h"

#include <algorithm>
#include <cmath>
#include <utility>

namespace shuntwright::sim {

void NodeCircuit::hold(std::size_t node, double volts) {
  held_[node] = used_[node] = true;
  volts_[node] = volts;
}

void NodeCircuit::connect(std::size_t a, std::size_t b, double ohms) {
  if (a == b) return;
  if (ohms <= 0) {
    used_[a] = used_[b] = true;
    const std::size_t from = root(a), to = root(b);
    if (from != to) joined_[from] = to + 1;
    anyJoined_ = true;
    return;
  }
  const double g = 1 / std::max(ohms, 1e-5);
  conductance_[a][b] += g;
  conductance_[b][a] += g;
  used_[a] = used_[b] = true;
}

std::size_t NodeCircuit::root(std::size_t node) const {
  while (joined_[node] != 0) node = joined_[node] - 1;
  return node;
}

NodeCircuit NodeCircuit::merged() const {
  NodeCircuit whole;
  for (std::size_t a = 0; a < kNodes; ++a) {
    if (held_[a]) whole.hold(root(a), volts_[a]);
    whole.used_[root(a)] = whole.used_[root(a)] || used_[a];
    for (std::size_t b = 0; b < kNodes; ++b) {
      if (root(a) != root(b)) whole.conductance_[root(a)][root(b)] += conductance_[a][b];
    }
  }
  return whole;
}

std::array<double, NodeCircuit::kNodes> NodeCircuit::solve() const {
  if (anyJoined_) {
    auto volts = merged().solve();
    for (std::size_t k = 0; k < kNodes; ++k) volts[k] = volts[root(k)];
    return volts;
  }
  std::array<std::size_t, kNodes> unknown{};
  std::size_t n = 0;
  for (std::size_t k = 0; k < kNodes; ++k) {
    if (used_[k] && !held_[k]) unknown[n++] = k;
  }
  std::array<std::array<double, kNodes + 1>, kNodes> m{};
  for (std::size_t row = 0; row < n; ++row) {
    const std::size_t node = unknown[row];
    double sum = 0, current = 0;
    for (std::size_t other = 0; other < kNodes; ++other) {
      sum += conductance_[node][other];
      if (held_[other]) current += conductance_[node][other] * volts_[other];
    }
    for (std::size_t column = 0; column < n; ++column) m[row][column] = -conductance_[node][unknown[column]];
    m[row][row] = sum;
    m[row][n] = current;
  }
  for (std::size_t pivot = 0; pivot < n; ++pivot) {
    std::size_t best = pivot;
    for (std::size_t row = pivot + 1; row < n; ++row) {
      if (std::abs(m[row][pivot]) > std::abs(m[best][pivot])) best = row;
    }
    std::swap(m[pivot], m[best]);
    if (m[pivot][pivot] == 0) continue;  // a piece that hangs in the air
    for (std::size_t row = pivot + 1; row < n; ++row) {
      const double factor = m[row][pivot] / m[pivot][pivot];
      if (factor == 0) continue;
      for (std::size_t column = pivot; column <= n; ++column) m[row][column] -= factor * m[pivot][column];
    }
  }
  std::array<double, kNodes> volts = volts_;
  for (std::size_t row = n; row-- > 0;) {
    double sum = m[row][n];
    for (std::size_t column = row + 1; column < n; ++column) sum -= m[row][column] * volts[unknown[column]];
    volts[unknown[row]] = m[row][row] == 0 ? 0 : sum / m[row][row];
  }
  return volts;
}

}  // namespace shuntwright::sim
