#pragma once

#include <chrono>

#include "driver/core/clock.h"
#include "driver/description/diagnostics.h"
#include "driver/description/rack.h"

namespace shuntwright::rack {

/// The day of a moment, UTC.
std::chrono::year_month_day dayOf(Instant instant);

/// "2026-05-31".
std::string isoText(std::chrono::year_month_day day);

/// True after the last day on which the resistor's certificate holds.
bool overdue(const description::Resistor& resistor, std::chrono::year_month_day today);

/// Warns of each resistor that is used and whose certificate is overdue.
void warnOfCertificates(const description::Rack& rack, std::chrono::year_month_day today,
                        description::Diagnostics& diagnostics);

}  // namespace shuntwright::rack
