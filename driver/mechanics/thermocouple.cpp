#include "driver/mechanics/thermocouple.h"

#include <cmath>
#include <ranges>
#include <span>
#include <string>

namespace shuntwright::mechanics {

using namespace units;

namespace {

// ITS-90 reference functions, NIST Monograph 175: mV over powers of degC.
constexpr double kJLow[] = {0.0,
                            0.503811878150E-01,
                            0.304758369300E-04,
                            -0.856810657200E-07,
                            0.132281952950E-09,
                            -0.170529583370E-12,
                            0.209480906970E-15,
                            -0.125383953360E-18,
                            0.156317256970E-22};
constexpr double kJHigh[] = {0.296456256810E+03,  -0.149761277860E+01, 0.317871039240E-02,
                             -0.318476867010E-05, 0.157208190040E-08,  -0.306913690560E-12};
constexpr double kKLow[] = {0.0,
                            0.394501280250E-01,
                            0.236223735980E-04,
                            -0.328589067840E-06,
                            -0.499048287770E-08,
                            -0.675090591730E-10,
                            -0.574103274280E-12,
                            -0.310888728940E-14,
                            -0.104516093650E-16,
                            -0.198892668780E-19,
                            -0.163226974860E-22};
constexpr double kKHigh[] = {
    -0.176004136860E-01, 0.389212049750E-01, 0.185587700320E-04,  -0.994575928740E-07, 0.318409457190E-09,
    -0.560728448890E-12, 0.560750590590E-15, -0.320207200030E-18, 0.971511471520E-22,  -0.121047212750E-25};
constexpr double kTLow[] = {0.0,
                            0.387481063640E-01,
                            0.441944343470E-04,
                            0.118443231050E-06,
                            0.200329735540E-07,
                            0.901380195590E-09,
                            0.226511565930E-10,
                            0.360711542050E-12,
                            0.384939398830E-14,
                            0.282135219250E-16,
                            0.142515947790E-18,
                            0.487686622860E-21,
                            0.107955392700E-23,
                            0.139450270620E-26,
                            0.797951539270E-30};
constexpr double kTHigh[] = {0.0,
                             0.387481063640E-01,
                             0.332922278800E-04,
                             0.206182434040E-06,
                             -0.218822568460E-08,
                             0.109968809280E-10,
                             -0.308157587720E-13,
                             0.454791352900E-16,
                             -0.275129016730E-19};

struct Curve {
  const char* name;
  double least_C, invertibleFrom_C, joint_C, most_C;
  std::span<const double> low, high;
  bool hump;  ///< type K above 0 degC has an exponential term
};

const Curve& curveOf(ThermocoupleType type) {
  static constexpr Curve kJ{"J", -210, -210, 760, 1200, kJLow, kJHigh, false};
  static constexpr Curve kK{"K", -270, -250, 0, 1372, kKLow, kKHigh, true};
  static constexpr Curve kT{"T", -270, -250, 0, 400, kTLow, kTHigh, false};
  switch (type) {
    case ThermocoupleType::J:
      return kJ;
    case ThermocoupleType::K:
      return kK;
    case ThermocoupleType::T:
      break;
  }
  return kT;
}

double millivoltsAt(const Curve& curve, double t) {
  const bool high = t > curve.joint_C;
  double sum = 0;
  for (const double c : std::views::reverse(high ? curve.high : curve.low)) sum = sum * t + c;
  if (high && curve.hump)
    sum += 0.118597600000E+00 * std::exp(-0.118343200000E-03 * (t - 126.9686) * (t - 126.9686));
  return sum;
}

}  // namespace

Result<Voltage> thermocoupleVoltage(ThermocoupleType type, Temperature t) {
  const Curve& curve = curveOf(type);
  if (!(t.celsius() >= curve.least_C && t.celsius() <= curve.most_C)) {
    return fail(ErrorCode::bad_use, "a type " + std::string(curve.name) + " thermocouple is not defined at " +
                                        std::to_string(t.celsius()) + " degC");
  }
  return millivoltsAt(curve, t.celsius()) * millivolt;
}

Result<Temperature> thermocoupleTemperature(ThermocoupleType type, Voltage measured,
                                            Temperature referenceJunction) {
  const Curve& curve = curveOf(type);
  const auto reference = thermocoupleVoltage(type, referenceJunction);
  if (!reference) return std::unexpected(reference.error());
  const double wanted = (measured + *reference).in(millivolt);
  double low = curve.invertibleFrom_C, high = curve.most_C;
  if (!(wanted >= millivoltsAt(curve, low) && wanted <= millivoltsAt(curve, high))) {
    return fail(ErrorCode::bad_use,
                "a type " + std::string(curve.name) + " thermocouple cannot give " +
                    std::to_string(measured.in(millivolt)) + " mV",
                {}, "look for an open or reversed couple, or for the wrong type");
  }
  // The curves rise all along, and halving needs no slope of theirs.
  for (int k = 0; k < 64; ++k) {
    const double middle = low + (high - low) / 2;
    (millivoltsAt(curve, middle) < wanted ? low : high) = middle;
  }
  return Temperature::celsius(low + (high - low) / 2);
}

}  // namespace shuntwright::mechanics
