#pragma once

#include <cstddef>
#include <vector>

namespace shuntwright::metrology {

/// A small dense matrix, row by row, so that headers need no linear-algebra library.
struct Matrix {
  std::size_t rows = 0, columns = 0;
  std::vector<double> values;

  Matrix() = default;
  Matrix(std::size_t rowCount, std::size_t columnCount)
      : rows(rowCount), columns(columnCount), values(rowCount * columnCount) {}

  double& operator()(std::size_t i, std::size_t j) { return values[i * columns + j]; }
  double operator()(std::size_t i, std::size_t j) const { return values[i * columns + j]; }
};

}  // namespace shuntwright::metrology
