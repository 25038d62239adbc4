#include "driver/rack/certificates.h"

#include <fmt/format.h>

#include <set>

namespace shuntwright::rack {

std::chrono::year_month_day dayOf(Instant instant) {
  return std::chrono::floor<std::chrono::days>(instant);
}

std::string isoText(std::chrono::year_month_day day) {
  return fmt::format("{:04}-{:02}-{:02}", static_cast<int>(day.year()), static_cast<unsigned>(day.month()),
                     static_cast<unsigned>(day.day()));
}

bool overdue(const description::Resistor& resistor, std::chrono::year_month_day today) {
  return resistor.due && today > *resistor.due;
}

void warnOfCertificates(const description::Rack& rack, std::chrono::year_month_day today,
                        description::Diagnostics& diagnostics) {
  std::set<std::string> used;
  for (const auto& channel : rack.channels) {
    for (const auto& shunt : channel.shunts) used.insert(shunt.resistor);
  }
  for (const auto& name : used) {
    const auto& resistor = rack.resistors.at(name);
    if (!overdue(resistor, today)) continue;
    diagnostics.warning(
        resistor.place,
        "the certificate of resistor \"" + name + "\" was good until " + isoText(*resistor.due),
        "have it calibrated again and enter value, uncertainty and due date of the new certificate");
  }
}

}  // namespace shuntwright::rack
