#include "tools/cli/record_table.h"

#include <cmath>
#include <cstdio>
#include <ostream>

namespace shuntwright::cli {

using namespace units;
using A = Table::Align;

namespace {

std::string significant(double value, int digits) {
  if (!std::isfinite(value)) return "inf";
  char text[48];
  std::snprintf(text, sizeof text, "%.*g", digits, value);
  return text;
}

}  // namespace

void printRecord(const Console& console, const calibration::Record& record) {
  console.out << console.bold("Calibration " + record.id) << "  rack " << record.rackName << ", "
              << rfc3339(record.started) << ", " << fixed(seconds(record.duration), 1) << " s, "
              << record.windows << " readings\n";
  Table table({{"channel", A::left},
               {"verdict", A::left},
               {"span"},
               {"U (95.45 %) %"},
               {"zero mV/V"},
               {"shunt", A::left},
               {"measured mV/V"},
               {"predicted mV/V"},
               {"lead ohm"},
               {"K: U %"}});
  for (const auto& c : record.channels) {
    const bool calibrated = !c.shunts.empty();
    const std::string verdict = c.verdict == calibration::Verdict::pass   ? console.good("pass")
                                : c.verdict == calibration::Verdict::fail ? console.bad("FAIL")
                                                                          : console.dim("not calibrated");
    bool first = true;
    const auto lead = [&] {
      if (!c.leadResistance) return std::string("-");
      const auto value = fixed(c.leadResistance->in(ohm), 3);
      return c.leads && c.leads->identifiable ? value + " +- " + fixed(c.leadUncertainty->in(ohm), 3) : value;
    };
    if (!calibrated) {
      table.row({c.name, verdict, "-", "-", fixed(c.zero.in(millivolt_per_volt), 5), "-", "-", "-", lead(),
                 fixed(c.factorUncertainty_percent, 2)});
    }
    for (const auto& s : c.shunts) {
      table.row({first ? c.name : "", first ? verdict : "", first ? fixed(c.spanRatio, 5) : "",
                 first ? fixed(c.budget.expandedUncertainty_percent, 3) : "",
                 first ? fixed(c.zero.in(millivolt_per_volt), 5) : "", s.name,
                 s.measured() ? fixed(s.measuredStep.in(millivolt_per_volt), 6) : "-",
                 fixed(s.predictedStep.in(millivolt_per_volt), 6), first ? lead() : "",
                 first ? fixed(c.factorUncertainty_percent, 2) : ""});
      first = false;
    }
  }
  table.print(console);
  for (const auto& c : record.channels) {
    for (const auto& f : c.findings) {
      console.out << console.bad(c.name) << "  " << f.code << ": " << f.message << "\n      " << f.evidence
                  << '\n';
    }
  }
  for (const auto& relay : record.relaysMaybeClosed) {
    console.out << console.bad("relay " + relay + " may still be closed") << '\n';
  }
}

namespace {

void printLeadBudget(const Console& console, const calibration::LeadIdentification& leads) {
  console.out << console.bold("Uncertainty budget of the identified leads") << '\n';
  Table table({{"quantity", A::left}, {"contribution ohm"}});
  for (const auto& line : leads.budget) table.row({line.quantity, fixed(line.uncertainty.in(ohm), 5)});
  table.print(console);
  console.out << "mean of the leads " << fixed(leads.resistance.in(ohm), 4)
              << " ohm, expanded U = " << fixed(leads.expandedUncertainty.in(ohm), 4)
              << " ohm (95.45 %); correlation with the span " << fixed(leads.correlation, 3) << '\n';
}

}  // namespace

void printBudget(const Console& console, const calibration::ChannelResult& channel) {
  printBudget(console, channel.name, channel.budget);
  for (const auto& at : channel.strainUncertainty) {
    const auto shown = [&](Strain value, int decimals) {
      return fixed(value.in(strain)*channel.unitsPerStrain, decimals);
    };
    const int decimals = channel.unitsPerStrain == 1e6 ? 2 : 4;
    console.out << "corrected value at " << shown(at.level, 0) << ' ' << channel.unit
                << ": U = " << shown(at.expanded, decimals) << ", with the gauge factor "
                << shown(at.expandedWithFactor, decimals) << ' ' << channel.unit << " (95.45 %)\n";
  }
  if (channel.leads && channel.leads->identifiable) printLeadBudget(console, *channel.leads);
}

void printBudget(const Console& console, const std::string& channel, const calibration::Budget& b) {
  console.out << console.bold("Uncertainty budget of the scale, channel " + channel) << '\n';
  Table table({{"quantity", A::left},
               {"value"},
               {"unit", A::left},
               {"distribution", A::left},
               {"std. uncertainty"},
               {"deg. of freedom"},
               {"sensitivity %/unit"},
               {"contribution %"}});
  for (const auto& l : b.lines) {
    table.row({l.quantity, significant(l.value, 6), l.unit, l.distribution,
               significant(l.standardUncertainty, 3), significant(l.degreesOfFreedom, 3),
               significant(l.sensitivity, 3), fixed(l.contribution_percent, 4)});
  }
  table.print(console);
  console.out << "combined " << fixed(b.standardUncertainty_percent, 4) << " %, effective degrees of freedom "
              << significant(b.effectiveDegreesOfFreedom, 3) << ", k = " << fixed(b.coverageFactor, 2)
              << ", expanded U = " << fixed(b.expandedUncertainty_percent, 3) << " % (95.45 %)\n";
}

}  // namespace shuntwright::cli
