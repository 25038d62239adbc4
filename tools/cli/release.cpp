#include <CLI/CLI.hpp>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/json/array.hpp>
#include <boost/json/object.hpp>
#include <boost/json/serialize.hpp>
#include <ostream>

#include "driver/rack/open_all_script.h"
#include "driver/transport/port_opener.h"
#include "tools/cli/bench_session.h"
#include "tools/cli/command.h"

namespace shuntwright::cli {

namespace {

namespace json = boost::json;

class Release final : public Command {
 public:
  std::string name() const override { return "release"; }
  std::string summary() const override { return "Opens every relay of a rack, from a new process, whatever an earlier one left"; }
  std::string example() const override { return "shuntwright release profiles/racks/gantry_beam.toml"; }
  void configure(CLI::App& app) override { bench_.addTo(app); }

  int run(const Console& console) override {
    auto rack = loadRackFor(console, bench_.rackFile);
    if (!rack) return kBadUse;
    std::set<description::RelayRef> left;
    if (auto journal = rack::FileJournal::open(journalPath(*rack))) left = (*journal)->unresolved();
    console.err << "Opening every relay also steps the readings of the channels they shunt.\n";
    int code = runOnBench(console, *rack, bench_, false,
                          [](SessionContext context) -> Task<Result<int>> { return openEvery(context); });
    bool blind = false;
    if (code != kPassed && code != kBadUse) {
      blind = true;
      console.err << "The devices do not answer as their profiles say; sending the stored bytes that open every relay.\n";
      if (playScript(console, *rack)) console.err << "Sent. Look at the board: nothing was read back.\n";
    }
    if (console.json) {
      json::object o;
      o["opened"] = code == kPassed;
      json::array relays;
      for (const auto& relay : left) relays.push_back(json::value(rack::text(relay)));
      o["left_by_an_earlier_run"] = std::move(relays);
      o["sent_without_answer"] = blind;
      console.out << json::serialize(o) << '\n';
    } else if (code == kPassed) {
      console.out << "every relay is open";
      if (!left.empty()) {
        console.out << " (left by an earlier run:";
        for (const auto& relay : left) console.out << ' ' << rack::text(relay);
        console.out << ')';
      }
      console.out << '\n';
    }
    return code;
  }

 private:
  static Task<Result<int>> openEvery(SessionContext context) {
    auto opened = co_await context.live.relays().openEvery();
    if (!opened) co_return std::unexpected(std::move(opened.error()));
    co_return kPassed;
  }

  struct Play {
    static Task<void> run(const rack::OpenAllScript* script, const description::Rack* rack, Clock* clock,
                          const Console* console, bool* sent) {
      auto opener = transport::portOpener(*clock);
      for (const auto& device : script->devices) {
        const auto* described = rack->device(device.name);
        if (!described) continue;
        auto stream = co_await opener(*described);
        if (!stream) {
          console->fail(stream.error());
          continue;
        }
        auto played = co_await rack::playOpenAll(device, **stream, *clock);
        if (!played) {
          console->fail(played.error());
        } else {
          *sent = true;
        }
        (*stream)->close();
      }
    }
  };

  static bool playScript(const Console& console, const description::Rack& rack) {
    auto script = rack::compileOpenAll(rack);
    if (!script) return false;
    boost::asio::io_context context;
    RealClock clock(context);
    bool sent = false;
    const auto* one = &*script;
    const auto* described = &rack;
    Clock* time = &clock;
    const Console* printer = &console;
    bool* out = &sent;
    boost::asio::co_spawn(
        context, [one, described, time, printer, out]() -> Task<void> { return Play::run(one, described, time, printer, out); },
        [](std::exception_ptr) {});
    context.run();
    return sent;
  }

  BenchOptions bench_;
};

}  // namespace

std::unique_ptr<Command> makeRelease() { return std::make_unique<Release>(); }

}  // namespace shuntwright::cli
