// proves P-14
#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <map>

#include "driver/bridge/rational_map.h"
#include "tests/reference/bench.h"

// The inverse of every circuit against brute force: the bridge listed part by part, its nodal equations
// solved in long double by Gaussian elimination, the strain found by halving a bracket. Nothing is taken from
// driver/bridge.
namespace shuntwright::bridge {
namespace {

using namespace reference;

/// Ratio of a bridge in long double. Wires of 0 ohm join their ends.
long double ratioOf(const Bench& bench) {
  const auto parts = partsOf(bench, nullptr);
  std::map<std::string, std::string> joined;
  const auto root = [&](std::string name) {
    while (joined.contains(name)) name = joined.at(name);
    return name;
  };
  for (const auto& part : parts) {
    const std::string a = root(part.from), b = root(part.to);
    if (part.r_ohm != 0 || a == b) continue;
    const bool keepB = b == "p" || b == "0";
    joined[keepB ? a : b] = keepB ? b : a;
  }
  std::map<std::string, std::size_t> unknown;
  for (const auto& part : parts) {
    for (const auto& name : {root(part.from), root(part.to)}) {
      if (name != "p" && name != "0") unknown.try_emplace(name, unknown.size());
    }
  }
  const std::size_t n = unknown.size();
  std::vector<std::vector<long double>> rows(n, std::vector<long double>(n + 1));
  for (const auto& part : parts) {
    if (part.r_ohm == 0) continue;
    const long double g = 1.0L / part.r_ohm;
    const std::string ends[] = {root(part.from), root(part.to)};
    for (int k = 0; k < 2; ++k) {
      if (!unknown.contains(ends[k])) continue;
      auto& row = rows[unknown.at(ends[k])];
      row[unknown.at(ends[k])] += g;
      const std::string& other = ends[1 - k];
      if (unknown.contains(other)) row[unknown.at(other)] -= g;
      if (other == "p") row[n] += g;
    }
  }
  for (std::size_t k = 0; k < n; ++k) {
    const auto below = [k](const auto& a, const auto& b) { return std::abs(a[k]) < std::abs(b[k]); };
    std::iter_swap(rows.begin() + static_cast<long>(k),
                   std::max_element(rows.begin() + static_cast<long>(k), rows.end(), below));
    for (std::size_t i = k + 1; i < n; ++i) {
      const long double share = rows[i][k] / rows[k][k];
      for (std::size_t j = k; j <= n; ++j) rows[i][j] -= share * rows[k][j];
    }
  }
  std::vector<long double> v(n);
  for (std::size_t k = n; k-- > 0;) {
    v[k] = rows[k][n];
    for (std::size_t j = k + 1; j < n; ++j) v[k] -= rows[k][j] * v[j];
    v[k] /= rows[k][k];
  }
  const auto at = [&](const std::string& name) {
    const std::string r = root(name);
    return r == "p" ? 1.0L : r == "0" ? 0.0L : v[unknown.at(r)];
  };
  const long double signal = at("s") - at("m");
  return bench.sensed ? signal / (at("sp") - at("sn")) : signal;
}

/// The strain at which a bridge shows this ratio.
long double inverseOf(Bench bench, double ratio, long double reach) {
  const auto ratioAt = [&](long double strain) {
    bench.strain = strain;
    return ratioOf(bench);
  };
  long double low = -reach, high = reach;
  const bool rising = ratioAt(high) > ratioAt(low);
  for (long double middle = 0; low < middle && middle < high; middle = (low + high) / 2) {
    ((ratioAt(middle) > ratio) == rising ? high : low) = middle;
  }
  return (low + high) / 2;
}

/// Strains to look at, over +-20 000 microstrain (a transducer: 1.2 times its rated value).
std::vector<double> strainsFor(const Bench& bench, Random& random) {
  const double range = bench.kind == CircuitKind::transducer ? 1.2 : 0.02;
  std::vector<double> strains{-range, range};
  for (int i = 0; i < 8; ++i) strains.push_back(range * random.uniform(-1, 1));
  return strains;
}

struct Worst {
  double moebius = 0, bent = 0;  ///< of circuits whose map is a Moebius function, and of the others, m/m
  int bentCircuits = 0;
};

/// Compares the map, and the exact inverse, with brute force at some strains.
void compare(const Bench& bench, Random& random, Worst& worst) {
  const Circuit circuit = asCircuit(bench);
  const bool transducer = bench.kind == CircuitKind::transducer;
  const double range = transducer ? 1.2 : 0.02;
  const auto fitted = mapOf(circuit, {}, range * units::strain);
  ASSERT_TRUE(fitted) << fitted.error().text();
  const bool moebius = fitted->map.isMoebius();
  worst.bentCircuits += moebius ? 0 : 1;
  for (const double strain : strainsFor(bench, random)) {
    Bench strained = bench;
    strained.strain = strain;
    const auto r = static_cast<double>(ratioOf(strained));
    const auto truth = static_cast<double>(inverseOf(bench, r, 2 * range));
    // 1e-14 strain; of a transducer, whose rated value is 1000 microstrain of its arms, so much of that.
    const double rounding = std::max(1e-12 * std::abs(truth), transducer ? 1e-11 : 1e-14);
    const auto newton = strainOf(circuit, r * units::volt_per_volt);
    ASSERT_TRUE(newton) << newton.error().text();
    EXPECT_NEAR(newton->in(units::strain), truth, rounding) << description::name(bench.kind);
    const double off = std::abs(fitted->map.strainAt(r) - truth);
    EXPECT_LE(off, moebius ? rounding : 1e-9 * range / 0.02)
        << description::name(bench.kind) << (bench.sensed ? ", sensed" : "") << " at " << strain;
    double& worstOf = moebius ? worst.moebius : worst.bent;
    worstOf = std::max(worstOf, off);
  }
}

TEST(Inverse, OfEveryCircuitIsThatOfBruteForce) {
  Random random(20250207);
  Worst worst;
  for (const auto& variant : kVariants) {
    for (int round = 0; round < 20; ++round) compare(drawnBench(variant, random), random, worst);
  }
  EXPECT_GT(worst.bentCircuits, 0);
  std::printf("inverse: Moebius maps off by %.2g at most, the %d bent ones by %.2g\n", worst.moebius,
              worst.bentCircuits, worst.bent);
}

// One active gauge, whatever else is in the bridge; and bridges of equal arms on equal leads whose input
// draws nothing: there a Moebius function is all.
TEST(Inverse, IsMoebiusWhereItShouldBe) {
  Random random(9);
  Worst worst;
  for (const auto& variant : kVariants) {
    for (int round = 0; round < 10; ++round) {
      Bench bench = drawnBench(variant, random);
      for (std::size_t i = 1; i < 4; ++i) bench.perStrain[i] = 0;
      compare(bench, random, worst);
      if (variant.kind == CircuitKind::full_bending_poisson) continue;
      Bench equal = drawnBench(variant, random);
      equal.perStrain = nominalPerStrain(variant.kind);
      equal.arms_ohm.fill(equal.arms_ohm[0]);
      equal.leads_ohm.fill(random.uniform(0, 25));
      equal.input_ohm = 1e30;
      compare(equal, random, worst);
    }
  }
  EXPECT_EQ(worst.bentCircuits, 0);
}

}  // namespace
}  // namespace shuntwright::bridge
