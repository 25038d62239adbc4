#pragma once

#include <iosfwd>
#include <memory>
#include <span>
#include <string>

#include "driver/core/error.h"
#include "driver/recording/reader.h"

namespace shuntwright::recording {

struct CsvOptions {
  std::string device;      ///< empty: the only one; an error when there are several
  bool raw = false;        ///< ratio columns in mV/V beside the corrected ones
};

/// One device's rows, all parts, as CSV (RFC 4180: CRLF, quotes where needed, one header line): time (RFC 3339, UTC), seconds since
/// the first row, each channel in its unit, its flags as a number at the end ("S01 flags"). Missing values are
/// empty. Errors: not_found for an unknown device, bad_use when one must be named; the reader's.
/// @param parts  of one recording, in order; at least one
Result<void> writeCsv(std::span<const std::unique_ptr<Reader>> parts, const CsvOptions& options, std::ostream& out);

/// A field as RFC 4180 wants it.
std::string csvField(const std::string& text);

}  // namespace shuntwright::recording
