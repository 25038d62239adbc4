#include "driver/recording/reader.h"

#include <unistd.h>

#include <algorithm>
#include <boost/json/parse.hpp>
#include <boost/json/value.hpp>
#include <cstring>

#include "driver/recording/file_layout.h"
#include "driver/recording/hdf5_handle.h"
#include "driver/recording/recorder.h"

namespace shuntwright::recording {

struct Reader::State {
  std::string path;
  Handle file;
  std::vector<RecordedDevice> devices;
  std::vector<std::uint64_t> rows, lost;
  std::vector<RecordedEvent> events;
  bool complete = false;
  std::int64_t part = 1;
  Instant started;
  std::string rackName, calibrationId, calibrationJson;
};

namespace {

struct ReadFailure {
  std::string what;
};

template <class Id>
Id check(Id result, const std::string& what) {
  if (result < 0) throw ReadFailure{what};
  return result;
}

std::string text(hid_t at, const char* name) {
  Handle attribute(check(H5Aopen(at, name, H5P_DEFAULT), name), H5Aclose);
  Handle type(check(H5Aget_type(attribute), name), H5Tclose);
  std::string value(H5Tget_size(type), '\0');
  check(H5Aread(attribute, type, value.data()), name);
  return value.c_str();
}

std::vector<std::string> texts(hid_t at, const char* name) {
  Handle attribute(check(H5Aopen(at, name, H5P_DEFAULT), name), H5Aclose);
  Handle type(check(H5Aget_type(attribute), name), H5Tclose);
  Handle space(check(H5Aget_space(attribute), name), H5Sclose);
  const std::size_t width = H5Tget_size(type), count = static_cast<std::size_t>(H5Sget_simple_extent_npoints(space));
  std::string flat(width * count, '\0');
  check(H5Aread(attribute, type, flat.data()), name);
  std::vector<std::string> values;
  for (std::size_t k = 0; k < count; ++k) {
    const char* from = flat.data() + k * width;
    values.emplace_back(from, ::strnlen(from, width));
  }
  return values;
}

std::vector<double> numbers(hid_t at, const char* name) {
  Handle attribute(check(H5Aopen(at, name, H5P_DEFAULT), name), H5Aclose);
  Handle space(check(H5Aget_space(attribute), name), H5Sclose);
  std::vector<double> values(static_cast<std::size_t>(H5Sget_simple_extent_npoints(space)));
  check(H5Aread(attribute, H5T_NATIVE_DOUBLE, values.data()), name);
  return values;
}

std::int64_t integer(hid_t at, const char* name) {
  Handle attribute(check(H5Aopen(at, name, H5P_DEFAULT), name), H5Aclose);
  std::int64_t value = 0;
  check(H5Aread(attribute, H5T_NATIVE_INT64, &value), name);
  return value;
}

std::int64_t counter(hid_t file, const std::string& path) {
  Handle data(check(H5Dopen2(file, path.c_str(), H5P_DEFAULT), path), H5Dclose);
  std::int64_t value = 0;
  check(H5Dread(data, H5T_NATIVE_INT64, H5S_ALL, H5S_ALL, H5P_DEFAULT, &value), path);
  return value;
}

std::string bytes(hid_t file, const std::string& path) {
  Handle data(check(H5Dopen2(file, path.c_str(), H5P_DEFAULT), path), H5Dclose);
  Handle space(check(H5Dget_space(data), path), H5Sclose);
  std::string value(static_cast<std::size_t>(H5Sget_simple_extent_npoints(space)), '\0');
  check(H5Dread(data, H5T_NATIVE_UINT8, H5S_ALL, H5S_ALL, H5P_DEFAULT, value.data()), path);
  return value;
}

herr_t collectName(hid_t, const char* name, const H5L_info_t*, void* out) {
  static_cast<std::vector<std::string>*>(out)->emplace_back(name);
  return 0;
}

RecordedDevice deviceAt(hid_t file, const std::string& name) {
  const std::string root = "/devices/" + name;
  Handle group(check(H5Gopen2(file, root.c_str(), H5P_DEFAULT), root), H5Gclose);
  RecordedDevice device;
  device.name = name;
  device.rate_Hz = numbers(group, "rate_Hz").at(0);
  const auto names = texts(group, "channels"), units = texts(group, "units");
  const auto columns = numbers(group, "columns"), p = numbers(group, "p"), q = numbers(group, "q"),
             w = numbers(group, "w"), scale = numbers(group, "units_per_strain"),
             calibrated = numbers(group, "calibrated");
  std::array<std::vector<double>, 4> bend;
  for (std::size_t b = 0; b < bend.size(); ++b) {
    if (H5Aexists(group, kBendNames[b]) > 0) bend[b] = numbers(group, kBendNames[b]);
  }
  for (std::size_t k = 0; k < names.size(); ++k) {
    device.channels.push_back({names[k], units.at(k), static_cast<int>(columns.at(k)), calibrated.at(k) != 0, p.at(k),
                               q.at(k), w.at(k), scale.at(k)});
    for (std::size_t b = 0; b < bend.size(); ++b) {
      if (!bend[b].empty()) device.channels.back().bend[b] = bend[b].at(k);
    }
  }
  return device;
}

std::vector<RecordedEvent> eventsIn(const std::string& lines) {
  std::vector<RecordedEvent> events;
  std::size_t at = 0;
  while (at < lines.size()) {
    const auto end = lines.find('\n', at);
    if (end == std::string::npos) break;  // a torn last line
    boost::system::error_code ec;
    const auto value = boost::json::parse(boost::json::string_view(lines.data() + at, end - at), ec);
    at = end + 1;
    if (ec || !value.is_object()) continue;
    const auto& o = value.as_object();
    RecordedEvent event;
    const auto word = [&](const char* key) {
      const auto* found = o.if_contains(key);
      return found && found->is_string() ? std::string(found->as_string()) : std::string();
    };
    if (const auto* ns = o.if_contains("unix_ns"); ns && ns->is_int64()) event.when = Instant(Nanoseconds(ns->as_int64()));
    event.kind = word("kind");
    event.text = word("text");
    event.device = word("device");
    if (const auto* count = o.if_contains("count")) event.count = count->to_number<std::uint64_t>(ec);
    if (const auto* continued = o.if_contains("continued")) event.continued = continued->is_bool() && continued->as_bool();
    events.push_back(std::move(event));
  }
  return events;
}

void readRows(hid_t file, const std::string& path, hid_t type, std::uint64_t first, std::uint64_t count,
              std::uint64_t columns, void* into) {
  if (count == 0) return;
  Handle data(check(H5Dopen2(file, path.c_str(), H5P_DEFAULT), path), H5Dclose);
  Handle space(check(H5Dget_space(data), path), H5Sclose);
  const int rank = columns == 0 ? 1 : 2;
  const hsize_t start[] = {first, 0}, size[] = {count, columns};
  check(H5Sselect_hyperslab(space, H5S_SELECT_SET, start, nullptr, size, nullptr), path);
  Handle memory(check(H5Screate_simple(rank, size, nullptr), path), H5Sclose);
  check(H5Dread(data, type, memory, space, H5P_DEFAULT, into), path);
}

}  // namespace

Reader::Reader(std::unique_ptr<State> state) : state_(std::move(state)) {}
Reader::~Reader() = default;

Result<std::unique_ptr<Reader>> Reader::open(const std::string& path) {
  quietHdf5();
  auto state = std::make_unique<State>();
  state->path = path;
  state->file = Handle(H5Fopen(path.c_str(), H5F_ACC_RDONLY, H5P_DEFAULT), H5Fclose);
  if (!state->file.valid()) {
    return fail(ErrorCode::io, "cannot open the recording", path, "check the name; a recording is an HDF5 file");
  }
  try {
    if (text(state->file, "format") != "shuntwright recording") throw ReadFailure{"its format"};
    state->part = integer(state->file, "part");
    state->started = Instant(Nanoseconds(integer(state->file, "started_unix_ns")));
    state->rackName = text(state->file, "rack");
    state->calibrationId = text(state->file, "calibration_id");
    state->calibrationJson = bytes(state->file, "/calibration_json");
    state->complete = bytes(state->file, "/ended") == "complete";
    Handle group(check(H5Gopen2(state->file, "/devices", H5P_DEFAULT), "/devices"), H5Gclose);
    std::vector<std::string> names;
    check(H5Literate(group, H5_INDEX_NAME, H5_ITER_INC, nullptr, collectName, &names), "/devices");
    for (const auto& name : names) {
      state->devices.push_back(deviceAt(state->file, name));
      state->rows.push_back(static_cast<std::uint64_t>(counter(state->file, "/devices/" + name + "/rows")));
      state->lost.push_back(static_cast<std::uint64_t>(counter(state->file, "/devices/" + name + "/lost")));
    }
    std::string events = bytes(state->file, "/events");
    const auto used = static_cast<std::size_t>(std::max<std::int64_t>(0, counter(state->file, "/events_bytes")));
    events.resize(std::min(events.size(), used));
    state->events = eventsIn(events);
  } catch (const ReadFailure& failure) {
    return fail(ErrorCode::bad_file, "this is no recording of this program: cannot read " + failure.what, path);
  } catch (const std::exception&) {
    return fail(ErrorCode::bad_file, "this recording's description is damaged", path);
  }
  return std::unique_ptr<Reader>(new Reader(std::move(state)));
}

const std::vector<RecordedDevice>& Reader::devices() const { return state_->devices; }
std::uint64_t Reader::rows(std::size_t device) const { return state_->rows.at(device); }
std::uint64_t Reader::lost(std::size_t device) const { return state_->lost.at(device); }
bool Reader::complete() const { return state_->complete; }
int Reader::part() const { return static_cast<int>(state_->part); }
Instant Reader::started() const { return state_->started; }
const std::string& Reader::path() const { return state_->path; }
std::string Reader::rackName() const { return state_->rackName; }
std::string Reader::calibrationId() const { return state_->calibrationId; }
std::string Reader::calibrationJson() const { return state_->calibrationJson; }
const std::vector<RecordedEvent>& Reader::events() const { return state_->events; }

Result<Rows> Reader::read(std::size_t device, std::uint64_t first, std::uint64_t count) const {
  if (first + count > rows(device)) {
    return fail(ErrorCode::bad_use, "the recording has only " + std::to_string(rows(device)) + " rows", state_->path);
  }
  const std::string root = "/devices/" + state_->devices[device].name;
  const std::uint64_t columns = state_->devices[device].channels.size();
  Rows rowsRead;
  std::vector<std::int64_t> time(count);
  rowsRead.ratio.resize(count * columns);
  rowsRead.corrected.resize(count * columns);
  rowsRead.flags.resize(count * columns);
  try {
    const hid_t file = state_->file;
    readRows(file, root + "/time", H5T_NATIVE_INT64, first, count, 0, time.data());
    readRows(file, root + "/ratio", H5T_NATIVE_FLOAT, first, count, columns, rowsRead.ratio.data());
    readRows(file, root + "/corrected", H5T_NATIVE_FLOAT, first, count, columns, rowsRead.corrected.data());
    readRows(file, root + "/flags", H5T_NATIVE_UINT8, first, count, columns, rowsRead.flags.data());
  } catch (const ReadFailure& failure) {
    return fail(ErrorCode::io, "cannot read " + failure.what, state_->path);
  }
  for (const auto ns : time) rowsRead.time.emplace_back(Nanoseconds(ns));
  return rowsRead;
}

Result<std::vector<std::unique_ptr<Reader>>> openParts(const std::string& path) {
  std::vector<std::unique_ptr<Reader>> parts;
  auto first = Reader::open(path);
  if (!first) return std::unexpected(std::move(first.error()));
  parts.push_back(std::move(*first));
  if (parts.front()->part() != 1) return parts;
  for (int part = 2; ::access(partPath(path, part).c_str(), F_OK) == 0; ++part) {
    auto next = Reader::open(partPath(path, part));
    // The recorder steps over files that stand in its way.
    if (!next || (*next)->started() != parts.front()->started() || (*next)->part() != part) continue;
    parts.push_back(std::move(*next));
  }
  return parts;
}

}  // namespace shuntwright::recording
