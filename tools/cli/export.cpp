#include <CLI/CLI.hpp>
#include <algorithm>
#include <boost/json/array.hpp>
#include <boost/json/object.hpp>
#include <boost/json/serialize.hpp>
#include <fstream>
#include <memory>
#include <ostream>
#include <string_view>
#include <vector>

#include "driver/recording/csv.h"
#include "driver/recording/load_steps.h"
#include "tools/cli/bench_session.h"
#include "tools/cli/command.h"

namespace shuntwright::cli {

namespace {

namespace json = boost::json;

/// HDF5 files begin with these eight bytes (HDF5 file format specification).
bool isRecording(const std::string& path) {
  std::ifstream in(path, std::ios::binary);
  char start[8] = {};
  in.read(start, sizeof start);
  return in.gcount() == sizeof start && std::string_view(start, sizeof start) == "\x89HDF\r\n\x1a\n";
}

class Export final : public Command {
 public:
  std::string name() const override { return "export"; }
  std::string summary() const override { return "Turns a recording into CSV (RFC 4180), or prints its load steps"; }
  std::string example() const override { return "shuntwright export run.h5 --device amp1 --out run.csv"; }
  void configure(CLI::App& app) override {
    app.add_option("FILE", file_, "The recording (HDF5)")->required();
    app.add_option("--device", csv_.device, "The device whose rows are wanted");
    app.add_option("--out", out_, "Write to this file (standard output when left out)");
    app.add_flag("--raw", csv_.raw, "Raw ratio columns as well");
    app.add_flag("--steps", steps_, "The mean of each channel over each load step instead of the samples");
  }

  int run(const Console& console) override {
    auto parts = recording::openParts(file_);
    if (!parts) return console.fail(parts.error());
    if (console.json) return describe(console, *parts);
    std::ofstream file;
    if (!out_.empty()) {
      if (isRecording(out_)) {
        return console.fail(Error(ErrorCode::refused, "the output would overwrite a recording", out_,
                                  "give --out another name, such as run.csv"));
      }
      file.open(out_, std::ios::binary);
      if (!file) return console.fail(Error(ErrorCode::io, "the file cannot be written", out_, "check the folder"));
    }
    std::ostream& to = out_.empty() ? console.out : file;
    auto done = steps_ ? writeSteps(*parts, to) : recording::writeCsv(*parts, csv_, to);
    if (!done) return console.fail(done.error());
    to.flush();
    if (!to) return console.fail(Error(ErrorCode::io, "not everything could be written", out_, "check the free space"));
    noteParts(console, *parts);
    return kPassed;
  }

 private:
  using Parts = std::vector<std::unique_ptr<recording::Reader>>;

  static void noteParts(const Console& console, const Parts& parts) {
    if (parts.size() > 1) {
      console.err << "note: " << parts.size() << " parts, up to " << parts.back()->path() << '\n';
    } else if (parts.front()->part() > 1) {
      console.err << "note: this is part " << parts.front()->part() << " alone; give the first part for the whole recording\n";
    }
    for (const auto& part : parts) {
      if (!part->complete()) console.err << "note: " << part->path() << " was not ended properly; all whole rows are here\n";
    }
  }

  static Result<void> writeSteps(const Parts& parts, std::ostream& to) {
    auto steps = recording::loadSteps(parts);
    if (!steps) return std::unexpected(std::move(steps.error()));
    to << "step,begin,channel,unit,mean,standard deviation,samples\r\n";
    for (const auto& step : *steps) {
      for (const auto& c : step.channels) {
        to << recording::csvField(step.label) << ',' << rfc3339(step.begin) << ',' << recording::csvField(c.channel) << ','
           << recording::csvField(c.unit) << ',' << (c.samples > 0 ? fixed(c.mean, 6) : "") << ','
           << (c.samples > 1 ? fixed(c.deviation, 6) : "") << ',' << c.samples << "\r\n";
      }
    }
    return {};
  }

  static int describe(const Console& console, const Parts& parts) {
    const recording::Reader& reader = *parts.front();
    json::object o;
    o["rack"] = reader.rackName();
    o["calibration_id"] = reader.calibrationId();
    o["part"] = reader.part();
    o["complete"] = std::all_of(parts.begin(), parts.end(), [](const auto& part) { return part->complete(); });
    json::array files;
    for (const auto& part : parts) files.push_back(json::value(part->path()));
    o["files"] = std::move(files);
    json::array devices;
    for (std::size_t k = 0; k < reader.devices().size(); ++k) {
      const auto& d = reader.devices()[k];
      json::object one;
      one["name"] = d.name;
      one["rate_Hz"] = d.rate_Hz;
      std::uint64_t rows = 0, lost = 0;
      for (const auto& part : parts) {
        rows += part->rows(k);
        lost += part->lost(k);
      }
      one["rows"] = rows;
      one["lost"] = lost;
      json::array channels;
      for (const auto& c : d.channels) {
        json::object channel;
        channel["name"] = c.name;
        channel["unit"] = c.unit;
        channel["calibrated"] = c.calibrated;
        channels.push_back(std::move(channel));
      }
      one["channels"] = std::move(channels);
      devices.push_back(std::move(one));
    }
    o["devices"] = std::move(devices);
    json::array events;
    for (const auto& part : parts) {
      for (const auto& e : part->events()) {
        json::object one;
        one["time"] = rfc3339(e.when);
        one["kind"] = e.kind;
        one["text"] = e.text;
        if (!e.device.empty()) one["device"] = e.device;
        if (e.count > 0) one["count"] = e.count;
        if (e.continued) one["continued"] = true;
        events.push_back(std::move(one));
      }
    }
    o["events"] = std::move(events);
    console.out << json::serialize(o) << '\n';
    return kPassed;
  }

  std::string file_, out_;
  recording::CsvOptions csv_;
  bool steps_ = false;
};

}  // namespace

std::unique_ptr<Command> makeExport() { return std::make_unique<Export>(); }

}  // namespace shuntwright::cli
