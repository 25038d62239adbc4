#include "driver/recording/file_layout.h"

#include <sys/stat.h>

#include <algorithm>
#include <cmath>

#include "driver/recording/hdf5_handle.h"

namespace shuntwright::recording {

namespace {

constexpr std::uint64_t kChunkBytes = 1 << 20;

/// Throws inside this file only; createFile turns it into an Error.
struct Hdf5Failure {
  std::string what;
};

template <class Id>
Id check(Id result, const char* what) {
  if (result < 0) throw Hdf5Failure{what};
  return result;
}

class Writer {
 public:
  explicit Writer(const std::string& path) {
    Handle access(check(H5Pcreate(H5P_FILE_ACCESS), "access properties"), H5Pclose);
    check(H5Pset_libver_bounds(access, H5F_LIBVER_EARLIEST, H5F_LIBVER_V18), "format");
    file_ = Handle(check(H5Fcreate(path.c_str(), H5F_ACC_EXCL, H5P_DEFAULT, access), "creating the file"), H5Fclose);
  }

  hid_t file() const { return file_; }

  Handle group(const std::string& path) {
    return Handle(check(H5Gcreate2(file_, path.c_str(), H5P_DEFAULT, H5P_DEFAULT, H5P_DEFAULT), "a group"), H5Gclose);
  }

  void text(hid_t at, const char* name, const std::string& value) {
    Handle type(check(H5Tcopy(H5T_C_S1), "a text type"), H5Tclose);
    check(H5Tset_size(type, std::max<std::size_t>(1, value.size())), "a text type");
    check(H5Tset_cset(type, H5T_CSET_UTF8), "a text type");
    Handle space(check(H5Screate(H5S_SCALAR), "a space"), H5Sclose);
    Handle attribute(check(H5Acreate2(at, name, type, space, H5P_DEFAULT, H5P_DEFAULT), name), H5Aclose);
    check(H5Awrite(attribute, type, value.empty() ? " " : value.data()), name);
  }

  void texts(hid_t at, const char* name, const std::vector<std::string>& values) {
    std::size_t width = 1;
    for (const auto& v : values) width = std::max(width, v.size());
    std::string flat;
    for (const auto& v : values) flat += v + std::string(width - v.size(), '\0');
    Handle type(check(H5Tcopy(H5T_C_S1), "a text type"), H5Tclose);
    check(H5Tset_size(type, width), "a text type");
    check(H5Tset_cset(type, H5T_CSET_UTF8), "a text type");
    check(H5Tset_strpad(type, H5T_STR_NULLPAD), "a text type");
    array(at, name, type, values.size(), flat.data());
  }

  void numbers(hid_t at, const char* name, const std::vector<double>& values) {
    array(at, name, H5T_IEEE_F64LE, values.size(), values.data());
  }

  void number(hid_t at, const char* name, std::int64_t value) {
    Handle space(check(H5Screate(H5S_SCALAR), "a space"), H5Sclose);
    Handle attribute(check(H5Acreate2(at, name, H5T_STD_I64LE, space, H5P_DEFAULT, H5P_DEFAULT), name), H5Aclose);
    check(H5Awrite(attribute, H5T_NATIVE_INT64, &value), name);
  }

  /// A small dataset in one piece; returns its file offset.
  std::uint64_t fixed(const std::string& path, hid_t type, std::uint64_t count, const void* value) {
    const hsize_t size = count;
    Handle space(check(H5Screate_simple(1, &size, nullptr), "a space"), H5Sclose);
    Handle properties(check(H5Pcreate(H5P_DATASET_CREATE), "properties"), H5Pclose);
    check(H5Pset_layout(properties, H5D_CONTIGUOUS), "layout");
    check(H5Pset_alloc_time(properties, H5D_ALLOC_TIME_EARLY), "allocation");
    check(H5Pset_fill_time(properties, value ? H5D_FILL_TIME_NEVER : H5D_FILL_TIME_ALLOC), "fill");
    Handle data(check(H5Dcreate2(file_, path.c_str(), type, space, H5P_DEFAULT, properties, H5P_DEFAULT), path.c_str()),
                H5Dclose);
    if (value) check(H5Dwrite(data, type, H5S_ALL, H5S_ALL, H5P_DEFAULT, value), path.c_str());
    return offsetOf(data, path);
  }

  void bytes(const std::string& path, const std::string& value) {
    const std::string kept = value.empty() ? std::string(1, '\n') : value;
    fixed(path, H5T_STD_U8LE, kept.size(), kept.data());
  }

  /// rows x columns (columns 0: one-dimensional), room for all rows.
  RowPlaces rows(const std::string& path, hid_t type, std::uint64_t count, std::uint64_t columns) {
    RowPlaces places;
    places.rowBytes = H5Tget_size(type) * std::max<std::uint64_t>(1, columns);
    places.rowsPerChunk = std::clamp<std::uint64_t>(kChunkBytes / places.rowBytes, 1, count);
    const int rank = columns == 0 ? 1 : 2;
    const hsize_t size[] = {count, columns}, chunk[] = {places.rowsPerChunk, columns};
    Handle space(check(H5Screate_simple(rank, size, size), "a space"), H5Sclose);
    Handle properties(check(H5Pcreate(H5P_DATASET_CREATE), "properties"), H5Pclose);
    check(H5Pset_chunk(properties, rank, chunk), "chunks");
    check(H5Pset_alloc_time(properties, H5D_ALLOC_TIME_EARLY), "allocation");
    check(H5Pset_fill_time(properties, H5D_FILL_TIME_NEVER), "fill");
    Handle data(check(H5Dcreate2(file_, path.c_str(), type, space, H5P_DEFAULT, properties, H5P_DEFAULT), path.c_str()),
                H5Dclose);
    hsize_t chunks = 0;
    check(H5Dget_num_chunks(data, space, &chunks), "chunk count");
    places.chunks.resize(chunks);
    for (hsize_t k = 0; k < chunks; ++k) {
      const hsize_t at[] = {k * places.rowsPerChunk, 0};
      unsigned filters = 0;
      haddr_t address = HADDR_UNDEF;
      hsize_t stored = 0;
      check(H5Dget_chunk_info_by_coord(data, at, &filters, &address, &stored), "chunk place");
      if (address == HADDR_UNDEF || filters != 0) throw Hdf5Failure{"a chunk was not allocated"};
      places.chunks[k] = address;
    }
    return places;
  }

 private:
  void array(hid_t at, const char* name, hid_t type, std::size_t count, const void* values) {
    const hsize_t size = count;
    Handle space(check(H5Screate_simple(1, &size, nullptr), "a space"), H5Sclose);
    Handle attribute(check(H5Acreate2(at, name, type, space, H5P_DEFAULT, H5P_DEFAULT), name), H5Aclose);
    check(H5Awrite(attribute, type, values), name);
  }

  static std::uint64_t offsetOf(hid_t data, const std::string& path) {
    const haddr_t address = H5Dget_offset(data);
    if (address == HADDR_UNDEF) throw Hdf5Failure{"no place for " + path};
    return address;
  }

  Handle file_;
};

DevicePlaces createDevice(Writer& writer, const RecordingPlan& plan, const RecordedDevice& device) {
  const std::string root = "/devices/" + device.name;
  Handle group = writer.group(root);
  writer.text(group, "name", device.name);
  writer.numbers(group, "rate_Hz", {device.rate_Hz});
  std::vector<std::string> names, units;
  std::vector<double> columns, p, q, w, scale, calibrated;
  std::array<std::vector<double>, 4> bend;
  for (const auto& c : device.channels) {
    names.push_back(c.name);
    units.push_back(c.unit);
    columns.push_back(c.column);
    p.push_back(c.p);
    q.push_back(c.q);
    w.push_back(c.w);
    scale.push_back(c.unitsPerStrain);
    for (std::size_t k = 0; k < bend.size(); ++k) bend[k].push_back(c.bend[k]);
    calibrated.push_back(c.calibrated ? 1 : 0);
  }
  writer.texts(group, "channels", names);
  writer.texts(group, "units", units);
  writer.numbers(group, "columns", columns);
  writer.numbers(group, "p", p);
  writer.numbers(group, "q", q);
  writer.numbers(group, "w", w);
  for (std::size_t k = 0; k < bend.size(); ++k) writer.numbers(group, kBendNames[k], bend[k]);
  writer.numbers(group, "units_per_strain", scale);
  writer.numbers(group, "calibrated", calibrated);
  writer.text(group, "correction", "u = (p * ratio + q) / (1 + w * ratio); value = units_per_strain * (u + b2 u^2 + b3 u^3 + b4 u^4 + b5 u^5)");

  DevicePlaces places;
  places.capacity = static_cast<std::uint64_t>(std::ceil(std::max(1.0, device.rate_Hz * plan.secondsPerFile))) + 64;
  const std::int64_t none = 0;
  places.rowsAt = writer.fixed(root + "/rows", H5T_STD_I64LE, 1, &none);
  places.lostAt = writer.fixed(root + "/lost", H5T_STD_I64LE, 1, &none);
  const std::uint64_t count = device.channels.size();
  places.time = writer.rows(root + "/time", H5T_STD_I64LE, places.capacity, 0);
  places.ratio = writer.rows(root + "/ratio", H5T_IEEE_F32LE, places.capacity, count);
  places.corrected = writer.rows(root + "/corrected", H5T_IEEE_F32LE, places.capacity, count);
  places.flags = writer.rows(root + "/flags", H5T_STD_U8LE, places.capacity, count);
  return places;
}

}  // namespace

Result<FileLayout> createFile(const std::string& path, const RecordingPlan& plan, int part) {
  quietHdf5();
  struct stat found {};
  if (::stat(path.c_str(), &found) == 0) {
    return fail(ErrorCode::refused, "the file exists already; recordings are never overwritten", path,
                "give another name, or move the old file away");
  }
  try {
    Writer writer(path);
    writer.text(writer.file(), "format", "shuntwright recording");
    writer.number(writer.file(), "format_version", 1);
    writer.number(writer.file(), "part", part);
    writer.text(writer.file(), "software", plan.software);
    writer.text(writer.file(), "rack", plan.rackName);
    writer.text(writer.file(), "calibration_id", plan.calibrationId);
    writer.number(writer.file(), "started_unix_ns", plan.started.time_since_epoch().count());
    writer.text(writer.file(), "clock", "UTC nanoseconds since 1970-01-01, kept monotonic from the start");
    writer.bytes("/rack_toml", plan.rackText);
    writer.bytes("/calibration_json", plan.calibrationJson);
    FileLayout layout;
    const std::int64_t none = 0;
    const char open[8] = {'o', 'p', 'e', 'n'};
    layout.endedAt = writer.fixed("/ended", H5T_STD_U8LE, 8, open);
    layout.eventsUsedAt = writer.fixed("/events_bytes", H5T_STD_I64LE, 1, &none);
    layout.eventBytes = plan.eventBytes;
    layout.eventsAt = writer.fixed("/events", H5T_STD_U8LE, plan.eventBytes, nullptr);
    writer.group("/devices");
    for (const auto& device : plan.devices) {
      if (device.channels.empty()) {
        layout.devices.emplace_back();
        continue;
      }
      layout.devices.push_back(createDevice(writer, plan, device));
    }
    return layout;
  } catch (const Hdf5Failure& failure) {
    return fail(ErrorCode::io, "cannot create the recording: HDF5 failed at " + failure.what, path,
                "check that the folder exists, is writable and has room");
  }
}

}  // namespace shuntwright::recording
