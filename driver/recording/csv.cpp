#include "driver/recording/csv.h"

#include <algorithm>
#include <charconv>
#include <cmath>
#include <optional>
#include <ostream>

namespace shuntwright::recording {

namespace {

constexpr std::uint64_t kRowsAtATime = 4096;

/// The shortest text that reads back as the same number; nothing for what is missing.
template <class Number>
void addNumber(std::string& line, Number value) {
  if (!std::isfinite(value)) return;
  char text[40];
  line.append(text, std::to_chars(text, text + sizeof text, value).ptr);
}

/// Nine digits tell any two single-precision ratios apart, and stay those of the ratio when it is shown in mV/V.
void addRatio(std::string& line, float ratio_V_per_V) {
  if (!std::isfinite(ratio_V_per_V)) return;
  char text[40];
  const double shown = 1e3 * static_cast<double>(ratio_V_per_V);
  line.append(text, std::to_chars(text, text + sizeof text, shown, std::chars_format::general, 9).ptr);
}

Result<std::size_t> chosen(const Reader& reader, const std::string& name) {
  const auto& devices = reader.devices();
  std::string all;
  for (std::size_t k = 0; k < devices.size(); ++k) {
    if (devices[k].name == name) return k;
    all += (all.empty() ? "" : ", ") + devices[k].name;
  }
  if (name.empty() && devices.size() == 1) return std::size_t{0};
  if (name.empty()) {
    return fail(ErrorCode::bad_use, "the recording has several devices with clocks of their own", {},
                "name one with --device: " + all);
  }
  return fail(ErrorCode::not_found, "the recording has no device " + name, {}, "it has: " + all);
}

/// @param start  of the recording: its first row
Result<void> writeRows(const Reader& reader, std::size_t device, bool raw, std::optional<Instant>& start, std::ostream& out) {
  const std::size_t columns = reader.devices()[device].channels.size();
  std::string line;
  for (std::uint64_t first = 0; first < reader.rows(device); first += kRowsAtATime) {
    auto rows = reader.read(device, first, std::min(kRowsAtATime, reader.rows(device) - first));
    if (!rows) return std::unexpected(std::move(rows.error()));
    for (std::size_t r = 0; r < rows->time.size(); ++r) {
      if (!start) start = rows->time[r];
      line = rfc3339(rows->time[r]) + ",";
      addNumber(line, seconds(rows->time[r] - *start));
      for (std::size_t k = 0; k < columns; ++k) {
        line += ',';
        addNumber(line, rows->corrected[r * columns + k]);
      }
      for (std::size_t k = 0; raw && k < columns; ++k) {
        line += ',';
        addRatio(line, rows->ratio[r * columns + k]);
      }
      for (std::size_t k = 0; k < columns; ++k) line += "," + std::to_string(int{rows->flags[r * columns + k]});
      out << line << "\r\n";
    }
  }
  return {};
}

}  // namespace

std::string csvField(const std::string& text) {
  if (text.find_first_of(",\"\r\n") == std::string::npos) return text;
  std::string quoted = "\"";
  for (const char c : text) {
    if (c == '"') quoted += '"';
    quoted += c;
  }
  return quoted + '"';
}

Result<void> writeCsv(std::span<const std::unique_ptr<Reader>> parts, const CsvOptions& options, std::ostream& out) {
  auto index = chosen(*parts.front(), options.device);
  if (!index) return std::unexpected(std::move(index.error()));
  const auto& device = parts.front()->devices()[*index];

  std::string line = "time,seconds";
  for (const auto& c : device.channels) line += "," + csvField(c.name + " [" + c.unit + "]");
  if (options.raw) {
    for (const auto& c : device.channels) line += "," + csvField(c.name + " raw [mV/V]");
  }
  for (const auto& c : device.channels) line += "," + csvField(c.name + " flags");
  out << line << "\r\n";

  std::optional<Instant> start;
  for (const auto& part : parts) {
    if (auto written = writeRows(*part, *index, options.raw, start, out); !written) return written;
  }
  return {};
}

}  // namespace shuntwright::recording
