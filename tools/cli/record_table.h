#pragma once

#include "driver/calibration/record.h"
#include "tools/cli/console.h"

namespace shuntwright::cli {

/// A calibration record as a person reads it: a line a channel, then the findings.
void printRecord(const Console& console, const calibration::Record& record);
/// One channel's uncertainty budget, as a quality manager reads it.
void printBudget(const Console& console, const calibration::ChannelResult& channel);
/// The lines of the scale alone.
void printBudget(const Console& console, const std::string& channel, const calibration::Budget& budget);

}  // namespace shuntwright::cli
