#include "sim/physics/flicker.h"

#include <cmath>

namespace shuntwright::sim {

namespace {
constexpr double kApart = 4;
}

Flicker::Flicker(double perDecade, double shortest_s, double longest_s, Random random) : random_(random) {
  if (perDecade <= 0) return;
  // One part for every log10(4) of a decade.
  deviation_ = perDecade * std::sqrt(std::log10(kApart));
  for (double t = shortest_s; t <= longest_s; t *= kApart) {
    Part part;
    part.timeConstant_s = t;
    part.value = deviation_ * random_.normal();
    parts_.push_back(part);
  }
}

double Flicker::after(double passed_s) {
  if (parts_.empty()) return 0;
  if (passed_s != lastStep_s_) {
    lastStep_s_ = passed_s;
    for (Part& part : parts_) {
      part.kept = std::exp(-passed_s / part.timeConstant_s);
      part.fresh = deviation_ * std::sqrt(1 - part.kept * part.kept);
    }
  }
  double sum = 0;
  for (Part& part : parts_) {
    part.value = part.kept * part.value + part.fresh * random_.normal();
    sum += part.value;
  }
  return sum;
}

}  // namespace shuntwright::sim
