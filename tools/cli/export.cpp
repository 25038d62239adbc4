#include <CLI/CLI.hpp>
#include <boost/json/array.hpp>
#include <boost/json/object.hpp>
#include <boost/json/serialize.hpp>
#include <fstream>
#include <ostream>
#include <string_view>

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
    auto reader = recording::Reader::open(file_);
    if (!reader) return console.fail(reader.error());
    if (console.json) return describe(console, **reader);
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
    auto done = steps_ ? writeSteps(**reader, to) : recording::writeCsv(**reader, csv_, to);
    if (!done) return console.fail(done.error());
    to.flush();
    if (!to) return console.fail(Error(ErrorCode::io, "not everything could be written", out_, "check the free space"));
    if (!(*reader)->complete()) console.err << "note: this recording was not ended properly; all whole rows are here\n";
    return kPassed;
  }

 private:
  static Result<void> writeSteps(const recording::Reader& reader, std::ostream& to) {
    auto steps = recording::loadSteps(reader);
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

  static int describe(const Console& console, const recording::Reader& reader) {
    json::object o;
    o["rack"] = reader.rackName();
    o["calibration_id"] = reader.calibrationId();
    o["part"] = reader.part();
    o["complete"] = reader.complete();
    json::array devices;
    for (std::size_t k = 0; k < reader.devices().size(); ++k) {
      const auto& d = reader.devices()[k];
      json::object one;
      one["name"] = d.name;
      one["rate_Hz"] = d.rate_Hz;
      one["rows"] = reader.rows(k);
      one["lost"] = reader.lost(k);
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
    for (const auto& e : reader.events()) {
      json::object one;
      one["time"] = rfc3339(e.when);
      one["kind"] = e.kind;
      one["text"] = e.text;
      if (!e.device.empty()) one["device"] = e.device;
      if (e.count > 0) one["count"] = e.count;
      events.push_back(std::move(one));
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
