// proves P-12
// NIST Statistical Reference Datasets, linear least squares, through the fit that the calibration uses.
// Norris and NoInt1: certified values as several public files quote them; the others from memory, each
// confirmed by exact rational arithmetic of the data given here. The load cell is also the worked example of
// the NIST/SEMATECH e-Handbook of Statistical Methods, 4.6.1.
#include <gtest/gtest.h>

#include <cmath>
#include <vector>

#include "driver/metrology/least_squares.h"

namespace shuntwright::metrology {
namespace {

struct Certified {
  const char* name;
  Matrix design;
  std::vector<double> y;
  std::vector<double> parameters, deviations;
  double residualDeviation;
  double digits;  ///< of agreement to ask for, of 15: the Wampler sets are made to lose them
};

std::vector<double> range(double first, double step, std::size_t count) {
  std::vector<double> x(count);
  for (std::size_t i = 0; i < count; ++i) x[i] = first + step * static_cast<double>(i);
  return x;
}

Certified norris() {
  const double yx[][2] = {
      {.1, .2},       {338.8, 337.4}, {118.1, 118.2}, {888.0, 884.6}, {9.2, 10.1},    {228.1, 226.5},
      {668.5, 666.3}, {998.5, 996.3}, {449.1, 448.6}, {778.9, 777.0}, {559.2, 558.2}, {.3, .4},
      {.1, .6},       {778.1, 775.5}, {668.8, 666.9}, {339.3, 338.0}, {448.9, 447.5}, {10.8, 11.6},
      {557.7, 556.0}, {228.3, 228.1}, {998.0, 995.8}, {888.8, 887.6}, {119.6, 120.2}, {.3, .3},
      {.6, .3},       {557.6, 556.8}, {339.3, 339.1}, {888.0, 887.2}, {998.5, 999.0}, {778.9, 779.0},
      {10.2, 11.1},   {117.6, 118.3}, {228.9, 229.2}, {668.4, 669.1}, {449.2, 448.9}, {.2, .5}};
  std::vector<double> x, y;
  for (const auto& row : yx) {
    y.push_back(row[0]);
    x.push_back(row[1]);
  }
  return {"Norris",
          straightLine(x),
          y,
          {-0.262323073774029, 1.00211681802045},
          {0.232818234301152, 0.429796848199937E-03},
          0.884796396144373,
          13};
}

Certified noIntercept1() {
  return {"NoInt1",
          throughOrigin(range(60, 1, 11)),
          range(130, 1, 11),
          {2.07438016528926},
          {0.165289256198347E-01},
          3.56753034006338,
          14};
}

Certified noIntercept2() {
  return {"NoInt2",
          throughOrigin(range(4, 1, 3)),
          {3, 4, 4},
          {0.727272727272727},
          {0.420827318078432E-01},
          0.369274472937998,
          14};
}

std::vector<double> loadCellLoads() {
  auto x = range(150'000, 150'000, 20);
  x.insert(x.end(), x.begin(), x.begin() + 20);
  return x;
}

const std::vector<double> kLoadCellReadings{
    .11019,  .21956,  .32949,  .43899,  .54803,  .65694,  .76562,  .87487,  .98292,  1.09146,
    1.20001, 1.30822, 1.41599, 1.52399, 1.63194, 1.73947, 1.84646, 1.95392, 2.06128, 2.16844,
    .11052,  .22018,  .32939,  .43886,  .54798,  .65739,  .76596,  .87474,  .98300,  1.09150,
    1.20004, 1.30818, 1.41613, 1.52408, 1.63159, 1.73965, 1.84696, 1.95445, 2.06177, 2.16829};

Certified pontius() {
  return {"Pontius",
          polynomial(loadCellLoads(), 2),
          kLoadCellReadings,
          {0.673565789473684E-03, 0.732059160401003E-06, -0.316081871345029E-14},
          {0.107938612033077E-03, 0.157817399981659E-09, 0.486652849992036E-16},
          0.205177424076185E-03,
          12};
}

/// y = 1 + x + ... + x^5 plus errors of three sizes: each a hundred times the last.
Certified wampler(const char* name, double size, double digits) {
  const double errors[] = {759,   -2048, 2048,  -2048, 2523,  -2048, 2048,  -2048, 1838,  -2048, 2048,
                           -2048, 1838,  -2048, 2048,  -2048, 2523,  -2048, 2048,  -2048, 759};
  const auto x = range(0, 1, 21);
  const Matrix design = polynomial(x, 5);
  std::vector<double> y;
  for (std::size_t i = 0; i < x.size(); ++i) {
    double sum = size * errors[i];
    for (std::size_t k = 0; k <= 5; ++k) sum += design(i, k);
    y.push_back(sum);
  }
  std::vector<double> deviations{2152.32624678170, 2363.55173469681, 779.343524331583,
                                 101.475507550350, 5.64566512170752, 0.112324854679312};
  for (auto& d : deviations) d *= size;
  return {name, design, y, std::vector<double>(6, 1.0), deviations, 2360.14502379268 * size, digits};
}

Certified longley() {
  const double rows[][7] = {
      {60323, 83.0, 234289, 2356, 1590, 107608, 1947},  {61122, 88.5, 259426, 2325, 1456, 108632, 1948},
      {60171, 88.2, 258054, 3682, 1616, 109773, 1949},  {61187, 89.5, 284599, 3351, 1650, 110929, 1950},
      {63221, 96.2, 328975, 2099, 3099, 112075, 1951},  {63639, 98.1, 346999, 1932, 3594, 113270, 1952},
      {64989, 99.0, 365385, 1870, 3547, 115094, 1953},  {63761, 100.0, 363112, 3578, 3350, 116219, 1954},
      {66019, 101.2, 397469, 2904, 3048, 117388, 1955}, {67857, 104.6, 419180, 2822, 2857, 118734, 1956},
      {68169, 108.4, 442769, 2936, 2798, 120445, 1957}, {66513, 110.8, 444546, 4681, 2637, 121950, 1958},
      {68655, 112.6, 482704, 3813, 2552, 123366, 1959}, {69564, 114.2, 502601, 3931, 2514, 125368, 1960},
      {69331, 115.7, 518173, 4806, 2572, 127852, 1961}, {70551, 116.9, 554894, 4007, 2827, 130081, 1962}};
  Matrix design(16, 7);
  std::vector<double> y;
  for (std::size_t i = 0; i < 16; ++i) {
    y.push_back(rows[i][0]);
    design(i, 0) = 1;
    for (std::size_t k = 1; k < 7; ++k) design(i, k) = rows[i][k];
  }
  return {"Longley",
          design,
          y,
          {-3482258.63459582, 15.0618722713733, -0.358191792925910E-01, -2.02022980381683, -1.03322686717359,
           -0.511041056535807E-01, 1829.15146461355},
          {890420.383607373, 84.9149257747669, 0.334910077722432E-01, 0.488399681651699, 0.214274163161675,
           0.226073200069370, 455.478499142212},
          304.854073561965,
          11};
}

/// Digits that agree, as the datasets' own score has it.
double digitsOf(double value, double certified) {
  return value == certified ? 15
                            : std::min(15.0, -std::log10(std::abs(value - certified) / std::abs(certified)));
}

class NistStrd : public testing::TestWithParam<Certified> {};

TEST_P(NistStrd, certifiedDigits) {
  const Certified& c = GetParam();
  const auto fit = fitLinear(c.design, c.y);
  ASSERT_TRUE(fit) << fit.error().text();
  ASSERT_EQ(fit->parameters.size(), c.parameters.size());
  for (std::size_t k = 0; k < c.parameters.size(); ++k) {
    EXPECT_GE(digitsOf(fit->parameters[k], c.parameters[k]), c.digits) << "parameter " << k;
    EXPECT_GE(digitsOf(fit->standardUncertainty(k), c.deviations[k]), c.digits) << "deviation " << k;
  }
  EXPECT_GE(digitsOf(fit->residualDeviation(), c.residualDeviation), c.digits);
}

INSTANTIATE_TEST_SUITE_P(Linear, NistStrd,
                         testing::Values(norris(), noIntercept1(), noIntercept2(), pontius(), longley(),
                                         wampler("Wampler3", 1, 12.5), wampler("Wampler4", 100, 10.5),
                                         wampler("Wampler5", 10'000, 8.5)),
                         [](const auto& row) { return std::string(row.param.name); });

TEST(NistStrd, coefficientOfDeterminationOfNorris) {
  const Certified c = norris();
  const auto fit = fitLinear(c.design, c.y);
  ASSERT_TRUE(fit);
  double mean = 0, total = 0;
  for (const double y : c.y) mean += y / static_cast<double>(c.y.size());
  for (const double y : c.y) total += (y - mean) * (y - mean);
  EXPECT_NEAR(1 - fit->chiSquared / total, 0.999993745883712, 1e-15);
  EXPECT_NEAR(fit->chiSquared, 26.6173985294224, 1e-12);
}

// e-Handbook 4.6.1: a straight line through the load cell's readings has a lack-of-fit F of 214.7464 (18 and
// 20 degrees), a quadratic one of 0.8107 (17 and 20) (from memory; 214.74692 and 0.81072390 with exact
// arithmetic).
TEST(NistHandbook, lackOfFitOfTheLoadCell) {
  const auto line = lackOfFitFromRepeats(straightLine(loadCellLoads()), kLoadCellReadings);
  ASSERT_TRUE(line) << line.error().text();
  EXPECT_NEAR(line->statistic, 214.7464, 6e-4);
  EXPECT_NEAR(line->statistic, 214.7469236539, 1e-8);
  EXPECT_EQ(line->degrees, 18);
  EXPECT_EQ(line->errorDegrees, 20);
  EXPECT_LT(line->probability, 1e-6);
  const auto quadratic = lackOfFitFromRepeats(polynomial(loadCellLoads(), 2), kLoadCellReadings);
  ASSERT_TRUE(quadratic);
  EXPECT_NEAR(quadratic->statistic, 0.8107, 5e-5);
  EXPECT_EQ(quadratic->degrees, 17);
  EXPECT_GT(quadratic->probability, 0.5);
}

}  // namespace
}  // namespace shuntwright::metrology
