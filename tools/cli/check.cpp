#include <boost/json/array.hpp>
#include <boost/json/object.hpp>
#include <boost/json/serialize.hpp>
#include <CLI/CLI.hpp>
#include <boost/asio/io_context.hpp>
#include <ostream>

#include "driver/calibration/foresight.h"
#include "driver/core/clock.h"
#include "driver/description/load.h"
#include "driver/rack/certificates.h"
#include "driver/rack/prediction.h"
#include "tools/cli/command.h"
#include "tools/cli/record_table.h"

namespace shuntwright::cli {

namespace {

namespace json = boost::json;
using namespace units;

json::array problemsJson(const description::Diagnostics& diagnostics) {
  json::array out;
  for (const auto& p : diagnostics.problems()) {
    json::object o;
    o["file"] = p.place.file;
    o["line"] = p.place.line > 0 ? json::value(p.place.line) : json::value(nullptr);
    o["column"] = p.place.column > 0 ? json::value(p.place.column) : json::value(nullptr);
    o["severity"] = p.severity == description::Severity::error ? "error" : "warning";
    o["message"] = p.message;
    o["remedy"] = p.remedy.empty() ? json::value(nullptr) : json::value(p.remedy);
    out.push_back(std::move(o));
  }
  return out;
}

json::object channelJson(const rack::ChannelPrediction& channel) {
  json::object o;
  o["name"] = channel.name;
  o["circuit"] = channel.circuit;
  json::array shunts;
  for (const auto& shunt : channel.shunts) {
    json::object s;
    s["name"] = shunt.name;
    s["predicted_before_mV_per_V"] = shunt.step.before.in(millivolt_per_volt);
    s["predicted_step_mV_per_V"] = shunt.step.step.in(millivolt_per_volt);
    s["simulated_microstrain"] =
        channel.transducer ? json::value(nullptr) : json::value(shunt.step.simulated.in(microstrain));
    s["simulated_value"] = shunt.step.simulated.in(strain)*channel.unitsPerStrain;
    s["simulated_unit"] = channel.unit;
    s["step_lead_percent_per_ohm"] = shunt.step.stepPercentPerOhm;
    s["strain_lead_percent_per_ohm"] = shunt.step.strainPercentPerOhm;
    s["carries_lead_loss"] = shunt.step.carriesLeadLoss;
    shunts.push_back(std::move(s));
  }
  o["shunts"] = std::move(shunts);
  return o;
}

class Check final : public Command {
 public:
  std::string name() const override { return "check"; }
  std::string summary() const override {
    return "Validates profiles and racks and shows what each shunt is predicted to do; touches no hardware";
  }
  std::string example() const override { return "shuntwright check profiles/racks/gantry_beam.toml"; }
  void configure(CLI::App& app) override {
    app.add_option("FILE", files_, "Profiles and racks (TOML)")->required();
    app.add_flag("--budget", budget_, "Show the uncertainty that each channel will reach and what limits it");
    app.add_flag("--monte-carlo", monteCarlo_,
                 "With --budget: a second opinion by drawing random numbers (JCGM 101)")
        ->needs("--budget");
    app.add_option("--lines", lines_, "With --budget: every line of this channel's budget")
        ->needs("--budget");
  }

  int run(const Console& console) override {
    description::Diagnostics diagnostics;
    const auto read = description::diskReader();
    std::vector<rack::ChannelPrediction> channels;
    boost::asio::io_context context;
    const RealClock clock(context);
    for (const auto& file : files_) {
      const auto text = read(file);
      if (!text) {
        diagnostics.error(Place{file}, "the file cannot be read", "check the path");
        continue;
      }
      if (description::kindOfFile(*text) == "profile") {
        (void)description::loadProfile(file, read, diagnostics);
        continue;
      }
      auto rack = description::loadRack(file, read, diagnostics);
      if (!rack) continue;
      auto predicted = rack::predict(*rack, diagnostics);
      rack::warnOfCertificates(*rack, rack::dayOf(clock.now()), diagnostics);
      if (budget_) foreseeAll(*rack, diagnostics);
      std::move(predicted.begin(), predicted.end(), std::back_inserter(channels));
    }
    if (console.json) {
      json::object o;
      o["ok"] = diagnostics.ok();
      o["problems"] = problemsJson(diagnostics);
      json::array list;
      for (const auto& channel : channels) {
        json::object one = channelJson(channel);
        if (budget_) one["budget"] = foresightJson(channel.name);
        list.push_back(std::move(one));
      }
      o["channels"] = std::move(list);
      console.out << json::serialize(o) << '\n';
    } else {
      console.err << diagnostics.render(console.colour && console.errIsTerminal);
      print(console, channels);
      printForesights(console);
      for (const auto& one : foresights_) {
        if (one.channel != lines_) continue;
        console.out << '\n';
        printBudget(console, one.channel, one.foresight.budget);
      }
      if (diagnostics.ok()) console.out << console.good("ok") << '\n';
    }
    return diagnostics.ok() ? kPassed : kBadUse;
  }

 private:
  static void print(const Console& console, const std::vector<rack::ChannelPrediction>& channels) {
    if (channels.empty()) return;
    using A = Table::Align;
    Table table({{"channel", A::left},
                 {"circuit", A::left},
                 {"shunt", A::left},
                 {"before mV/V"},
                 {"step mV/V"},
                 {"simulates"},
                 {"unit", A::left},
                 {"step %/ohm"},
                 {"strain %/ohm"},
                 {"carries lead loss", A::left}});
    for (const auto& channel : channels) {
      if (channel.shunts.empty()) table.row({channel.name, channel.circuit, "none"});
      for (const auto& shunt : channel.shunts) {
        const auto& s = shunt.step;
        table.row({channel.name, channel.circuit, shunt.name, fixed(s.before.in(millivolt_per_volt), 5),
                   fixed(s.step.in(millivolt_per_volt), 6),
                   fixed(s.simulated.in(strain)*channel.unitsPerStrain, channel.transducer ? 3 : 1),
                   channel.unit, fixed(s.stepPercentPerOhm, 4), fixed(s.strainPercentPerOhm, 4),
                   s.carriesLeadLoss ? "yes" : "no"});
      }
    }
    table.print(console);
  }

  void foreseeAll(const description::Rack& rack, description::Diagnostics& diagnostics) {
    for (const auto& channel : rack.channels) {
      if (channel.shunts.empty()) continue;
      if (auto foreseen = calibration::foresee(rack, channel)) {
        if (foreseen->leads && !foreseen->leads->identifiable) {
          const auto& advice = foreseen->leads->advice;
          diagnostics.error(channel.place,
                            "the leads of channel \"" + channel.name +
                                "\" cannot be identified: " + foreseen->leads->reason,
                            advice ? advice->what : "use lead_loss = \"in prediction\"");
        }
        const auto& sheet = channel.transducer;
        foresights_.push_back({channel.name,
                               sheet ? sheet->unit : "microstrain",
                               sheet ? sheet->ratedValue : 1e6,
                               std::move(*foreseen),
                               {}});
        if (!monteCarlo_) continue;
        // One seed a channel, so that a channel's figure does not depend on the others.
        Random random(1);
        auto second = calibration::secondOpinion(rack, channel, foresights_.back().foresight.budget, random);
        if (second) foresights_.back().second = *second;
      } else {
        diagnostics.error(channel.place,
                          "no budget for channel \"" + channel.name + "\": " + foreseen.error().message,
                          foreseen.error().remedy);
      }
    }
  }

  json::value foresightJson(const std::string& channel) const {
    for (const auto& [name, unit, unitsPerStrain, foreseen, second] : foresights_) {
      if (name != channel) continue;
      json::object o;
      o["expanded_uncertainty_percent"] = foreseen.budget.expandedUncertainty_percent;
      o["coverage_factor"] = foreseen.budget.coverageFactor;
      o["lead_expanded_uncertainty_ohm"] = nullptr;
      if (const auto& leads = foreseen.leads) {
        o["leads_identifiable"] = leads->identifiable;
        o["lead_expanded_uncertainty_ohm"] = leads->expandedUncertainty.in(ohm);
        o["lead_advice"] = leads->advice ? json::value(leads->advice->what) : json::value(nullptr);
        o["lead_expanded_uncertainty_then_ohm"] =
            leads->advice ? json::value(leads->advice->expandedUncertainty.in(ohm)) : json::value(nullptr);
      }
      o["largest_input"] = foreseen.largest;
      const auto& at = foreseen.atLargest;
      o["unit"] = unit;
      o["largest_value"] = at.level.in(strain)*unitsPerStrain;
      o["largest_value_expanded_uncertainty"] = at.expanded.in(strain)*unitsPerStrain;
      o["largest_value_expanded_uncertainty_with_gauge_factor"] =
          at.expandedWithFactor.in(strain)*unitsPerStrain;
      o["advice"] = foreseen.advice ? json::value(foreseen.advice->what) : json::value(nullptr);
      o["expanded_uncertainty_then_percent"] =
          foreseen.advice ? json::value(foreseen.advice->to_percent) : json::value(nullptr);
      if (second) {
        o["monte_carlo_low_percent"] = second->interval.low;
        o["monte_carlo_high_percent"] = second->interval.high;
        o["monte_carlo_trials"] = second->trials;
        o["monte_carlo_agrees"] = second->agrees;
      }
      return o;
    }
    return nullptr;
  }

  void printForesights(const Console& console) const {
    if (foresights_.empty()) return;
    using A = Table::Align;
    console.out << "\nUncertainty to come (95.45 %, without the readings' noise): of the scale, and of the "
                   "largest strain with its zero\n";
    std::vector<Table::Column> columns{{"channel", A::left}, {"U %"},          {"at"}, {"+-"},
                                       {"with factor"},      {"unit", A::left}};
    if (monteCarlo_) columns.insert(columns.end(), {{"drawn from %"}, {"drawn to %"}, {"agrees", A::left}});
    columns.insert(columns.end(),
                   {{"limited by", A::left}, {"what would narrow it most", A::left}, {"to %"}});
    Table table(columns);
    for (const auto& [name, unit, unitsPerStrain, foreseen, second] : foresights_) {
      const auto& at = foreseen.atLargest;
      std::vector<std::string> row{
          name,
          fixed(foreseen.budget.expandedUncertainty_percent, 3),
          fixed(at.level.in(strain)*unitsPerStrain, 0),
          fixed(at.expanded.in(strain)*unitsPerStrain, unitsPerStrain == 1e6 ? 2 : 4),
          fixed(at.expandedWithFactor.in(strain)*unitsPerStrain, unitsPerStrain == 1e6 ? 2 : 4),
          unit};
      if (second) {
        row.insert(row.end(), {fixed(second->interval.low, 3), fixed(second->interval.high, 3),
                               second->agrees ? "yes" : "NO"});
      } else if (monteCarlo_) {
        row.insert(row.end(), {"", "", "no solution"});
      }
      row.insert(row.end(), {foreseen.largest, foreseen.advice ? foreseen.advice->what : "nothing by itself",
                             foreseen.advice ? fixed(foreseen.advice->to_percent, 3) : ""});
      table.row(row);
    }
    table.print(console);
    printLeads(console);
  }

  void printLeads(const Console& console) const {
    using A = Table::Align;
    Table table({{"channel", A::left},
                 {"leads to +- ohm"},
                 {"limited by", A::left},
                 {"what would narrow it most", A::left},
                 {"to +- ohm"}});
    bool any = false;
    for (const auto& one : foresights_) {
      const auto& leads = one.foresight.leads;
      if (!leads) continue;
      any = true;
      table.row({one.channel, leads->identifiable ? fixed(leads->expandedUncertainty.in(ohm), 3) : "not told",
                 leads->budget.empty() ? "" : leads->budget.front().quantity,
                 leads->advice ? leads->advice->what : "nothing by itself",
                 leads->advice ? fixed(leads->advice->expandedUncertainty.in(ohm), 3) : ""});
    }
    if (!any) return;
    console.out << "\nLeads to be identified (95.45 %)\n";
    table.print(console);
  }

  struct Foreseen {
    std::string channel, unit;
    double unitsPerStrain = 1e6;
    calibration::Foresight foresight;
    std::optional<calibration::SecondOpinion> second;
  };

  std::vector<std::string> files_;
  bool budget_ = false;
  bool monteCarlo_ = false;
  std::string lines_;
  std::vector<Foreseen> foresights_;
};

}  // namespace

std::unique_ptr<Command> makeCheck() {
  return std::make_unique<Check>();
}

}  // namespace shuntwright::cli
