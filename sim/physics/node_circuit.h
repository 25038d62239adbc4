#pragma once

#include <array>
#include <cstddef>

namespace shuntwright::sim {

/// A small resistor circuit, solved by node voltages: Kirchhoff's current law at every node whose voltage is not
/// given, Gaussian elimination with pivoting. Nodes are numbers below kNodes. No allocation.
class NodeCircuit {
 public:
  static constexpr std::size_t kNodes = 14;

  void hold(std::size_t node, double volts);
  /// 0 ohm makes one node of the two; other resistors below 10 micro-ohm count as 10 micro-ohm.
  void connect(std::size_t a, std::size_t b, double ohms);
  /// Voltages of all nodes; those that nothing is connected to are 0.
  std::array<double, kNodes> solve() const;

 private:
  std::size_t root(std::size_t node) const;
  NodeCircuit merged() const;

  std::array<std::array<double, kNodes>, kNodes> conductance_{};  ///< sums, off-diagonal positive
  std::array<double, kNodes> volts_{};
  std::array<std::size_t, kNodes> joined_{};  ///< number of the node it is one with, plus 1; 0: itself
  bool anyJoined_ = false;
  std::array<bool, kNodes> held_{}, used_{};
};

}  // namespace shuntwright::sim
