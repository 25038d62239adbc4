#pragma once

#include <algorithm>
#include <array>
#include <cstddef>

namespace shuntwright::bridge {

/// A network of conductances between up to MaxNodes points, with node 0 held at 1 and node 1 at 0.
///
/// Solved by eliminating one node after the other, each star becoming a mesh: g_ij += g_ki g_kj / sum_k.
/// This is Gaussian elimination of the nodal equations in which nothing is ever subtracted, so every voltage
/// is right to a few units of its last digit whatever the spread of the conductances (Grassmann, Taksar and
/// Heyman's argument, from memory). A wire of 0 ohm may therefore stand as one of 1e-30 ohm.
///
/// Scalar is double, or std::complex<double> for derivatives by the complex step.
template <class Scalar, int MaxNodes>
class Network {
 public:
  explicit Network(int nodes) : nodes_(nodes) {}

  void add(int from, int to, Scalar conductance) {
    if (from == to) return;
    row(std::max(from, to))[static_cast<std::size_t>(std::min(from, to))] += conductance;
  }

  /// Once, after the last add() and before voltages().
  void eliminate() {
    for (int k = nodes_ - 1; k >= 2; --k) {
      const Row& star = row(k);
      Scalar sum{};
      for (int i = 0; i < k; ++i) sum += star[static_cast<std::size_t>(i)];
      total_[static_cast<std::size_t>(k)] = sum;
      for (int i = 1; i < k; ++i) {
        const Scalar share = star[static_cast<std::size_t>(i)] / sum;
        Row& mesh = row(i);
        for (int j = 0; j < i; ++j) {
          mesh[static_cast<std::size_t>(j)] += share * star[static_cast<std::size_t>(j)];
        }
      }
    }
  }

  using Nodes = std::array<Scalar, static_cast<std::size_t>(MaxNodes)>;

  /// Voltage of the first `count` nodes with nothing but the source connected.
  Nodes voltages(int count) const {
    Nodes v{};
    v[0] = 1;
    substitute(v, Nodes{}, count);
    return v;
  }

  /// Voltages with the source replaced by a wire and these currents flowing into the nodes instead.
  Nodes response(Nodes current) const {
    for (int k = nodes_ - 1; k >= 2; --k) {
      const Scalar share = current[static_cast<std::size_t>(k)] / total_[static_cast<std::size_t>(k)];
      for (int i = 2; i < k; ++i) {
        current[static_cast<std::size_t>(i)] += share * row(k)[static_cast<std::size_t>(i)];
      }
    }
    Nodes v{};
    substitute(v, current, nodes_);
    return v;
  }

 private:
  using Row = Nodes;
  Row& row(int k) { return conductance_[static_cast<std::size_t>(k)]; }
  const Row& row(int k) const { return conductance_[static_cast<std::size_t>(k)]; }

  void substitute(Nodes& v, const Nodes& current, int count) const {
    for (int k = 2; k < count; ++k) {
      Scalar sum = current[static_cast<std::size_t>(k)];
      for (int j = 0; j < k; ++j) sum += row(k)[static_cast<std::size_t>(j)] * v[static_cast<std::size_t>(j)];
      v[static_cast<std::size_t>(k)] = sum / total_[static_cast<std::size_t>(k)];
    }
  }

  int nodes_;
  std::array<Row, static_cast<std::size_t>(MaxNodes)> conductance_{};  ///< lower triangle
  Nodes total_{};
};

}  // namespace shuntwright::bridge
