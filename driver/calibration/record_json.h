#pragma once

#include <string>
#include <string_view>

#include "driver/calibration/record.h"
#include "driver/core/error.h"

namespace shuntwright::calibration {

/// The record as one JSON document (one line, keys always in the same order, unknown is null). Quantities
/// carry their unit in the key.
std::string recordJson(const Record& record);

/// Reads back what recordJson wrote. `where` names the source in errors. Errors: bad_file.
Result<Record> parseRecordJson(std::string_view text, const std::string& where);

}  // namespace shuntwright::calibration
