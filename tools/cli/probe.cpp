#include <CLI/CLI.hpp>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/json/array.hpp>
#include <boost/json/object.hpp>
#include <boost/json/serialize.hpp>
#include <ostream>

#include "tools/cli/bench_session.h"
#include "tools/cli/command.h"

namespace shuntwright::cli {

namespace {

namespace json = boost::json;

class Probe final : public Command {
 public:
  std::string name() const override { return "probe"; }
  std::string summary() const override { return "Opens and identifies every device of a rack; changes nothing on them"; }
  std::string example() const override { return "shuntwright probe profiles/racks/small_bench.toml --json"; }
  void configure(CLI::App& app) override { bench_.addTo(app); }

  int run(const Console& console) override {
    auto rack = loadRackFor(console, bench_.rackFile);
    if (!rack) return kBadUse;
    std::vector<Found> found;
    const int code = runOnBench(console, *rack, bench_, false, [&found](SessionContext context) -> Task<Result<int>> {
      return ask(context, &found);
    });
    if (code != kPassed) return code;
    if (console.json) {
      json::array devices;
      for (const auto& f : found) {
        json::object o;
        o["name"] = f.device->name;
        o["port"] = f.device->port.text;
        o["profile"] = f.device->profile->name;
        o["model"] = f.identity.model;
        o["serial_number"] = f.identity.serialNumber;
        o["version"] = f.identity.version;
        devices.push_back(std::move(o));
      }
      json::object o;
      o["ok"] = true;
      o["devices"] = std::move(devices);
      console.out << json::serialize(o) << '\n';
      return kPassed;
    }
    using A = Table::Align;
    Table table({{"device", A::left}, {"port", A::left}, {"profile", A::left}, {"model", A::left},
                 {"serial number", A::left}, {"version", A::left}});
    for (const auto& f : found) {
      table.row({f.device->name, f.device->port.text, f.device->profile->name, f.identity.model, f.identity.serialNumber,
                 f.identity.version});
    }
    table.print(console);
    return kPassed;
  }

 private:
  struct Found {
    const description::Device* device;
    device::Identity identity;
  };

  static Task<Result<int>> ask(SessionContext context, std::vector<Found>* found) {
    for (const auto& described : context.live.described().devices) {
      found->push_back({&described, context.live.identity(described.name)});
    }
    co_return kPassed;
  }

  BenchOptions bench_;
};

}  // namespace

std::unique_ptr<Command> makeProbe() { return std::make_unique<Probe>(); }

}  // namespace shuntwright::cli
