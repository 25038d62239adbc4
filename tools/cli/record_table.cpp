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

void printBudget(const Console& console, const calibration::ChannelResult& channel) {
  const auto& b = channel.budget;
  console.out << console.bold("Uncertainty budget of the scale, channel " + channel.name) << '\n';
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
