#include "driver/calibration/record_json.h"

#include <algorithm>
#include <boost/json/parse.hpp>
#include <boost/json/serialize.hpp>
#include <boost/json/value.hpp>
#include <cmath>
#include <limits>

namespace shuntwright::calibration {

namespace json = boost::json;
using namespace units;

namespace {

json::value number(double value) {
  return std::isfinite(value) ? json::value(value) : json::value(nullptr);
}

json::value mVperV(Ratio r) {
  return number(r.in(millivolt_per_volt));
}

json::object shuntJson(const ShuntResult& s) {
  json::object o;
  o["name"] = s.name;
  o["before_mV_per_V"] = mVperV(s.before);
  o["after_mV_per_V"] = mVperV(s.after);
  o["return_mV_per_V"] = mVperV(s.returned);
  o["measured_step_mV_per_V"] = mVperV(s.measuredStep);
  o["predicted_step_mV_per_V"] = mVperV(s.predictedStep);
  o["step_deviation_mV_per_V"] = mVperV(s.stepDeviation);
  o["noise_mV_per_V"] = mVperV(s.noise);
  o["residual_mV_per_V"] = mVperV(s.residual);
  o["step_expanded_uncertainty_percent"] = number(s.deviationUncertainty.in(percent));
  o["return_expanded_uncertainty_mV_per_V"] = mVperV(s.returnUncertainty);
  o["noise_expanded_uncertainty_mV_per_V"] = mVperV(s.noiseUncertainty);
  o["settling_s"] = number(seconds(s.settling));
  o["repeats"] = s.repeats;
  return o;
}

json::object budgetJson(const Budget& b) {
  json::array lines;
  for (const auto& line : b.lines) {
    json::object o;
    o["quantity"] = line.quantity;
    o["value"] = number(line.value);
    o["unit"] = line.unit;
    o["distribution"] = line.distribution;
    o["standard_uncertainty"] = number(line.standardUncertainty);
    o["degrees_of_freedom"] = number(line.degreesOfFreedom);
    o["sensitivity_percent_per_unit"] = number(line.sensitivity);
    o["contribution_percent"] = number(line.contribution_percent);
    lines.push_back(std::move(o));
  }
  json::object o;
  o["lines"] = std::move(lines);
  o["standard_uncertainty_percent"] = number(b.standardUncertainty_percent);
  o["effective_degrees_of_freedom"] = number(b.effectiveDegreesOfFreedom);
  o["coverage_factor"] = number(b.coverageFactor);
  o["coverage_probability_percent"] = 95.45;
  o["expanded_uncertainty_percent"] = number(b.expandedUncertainty_percent);
  return o;
}

json::value leadsJson(const LeadIdentification& found) {
  json::object o;
  o["identifiable"] = found.identifiable;
  o["reason"] = found.reason;
  o["resistance_ohm"] = number(found.resistance.in(ohm));
  o["expanded_uncertainty_ohm"] = number(found.expandedUncertainty.in(ohm));
  o["stated_ohm"] = number(found.stated.in(ohm));
  o["span_standard_uncertainty"] = number(found.spanStandardUncertainty);
  o["correlation_with_span"] = number(found.correlation);
  o["condition"] = number(found.condition);
  o["degrees_of_freedom"] = number(found.degreesOfFreedom);
  o["probability"] = number(found.probability);
  json::array leads, budget;
  for (const auto& lead : found.leads) {
    leads.push_back({{"terminal", std::string(description::name(lead.terminal))},
                     {"resistance_ohm", number(lead.resistance.in(ohm))},
                     {"expanded_uncertainty_ohm", number(lead.expandedUncertainty.in(ohm))},
                     {"told_apart", lead.toldApart}});
  }
  for (const auto& line : found.budget) {
    budget.push_back({{"quantity", line.quantity}, {"contribution_ohm", number(line.uncertainty.in(ohm))}});
  }
  o["leads"] = std::move(leads);
  o["budget"] = std::move(budget);
  o["advice"] = found.advice ? json::value(found.advice->what) : json::value(nullptr);
  o["expanded_uncertainty_then_ohm"] =
      found.advice ? number(found.advice->expandedUncertainty.in(ohm)) : json::value(nullptr);
  return o;
}

json::value straightnessJson(const Straightness& line) {
  json::object o;
  o["worst_residual_percent"] = number(line.worst_percent);
  o["expanded_uncertainty_percent"] = number(line.expandedUncertainty_percent);
  o["chi_squared"] = number(line.chiSquared);
  o["degrees_of_freedom"] = number(line.degreesOfFreedom);
  o["probability"] = number(line.probability);
  return o;
}

json::object channelJson(const ChannelResult& c) {
  json::object o;
  o["name"] = c.name;
  json::object basis;
  for (const auto& [what, value] : c.basis) basis[what] = value;
  o["basis"] = std::move(basis);
  o["verdict"] = name(c.verdict);
  json::array findings;
  for (const auto& f : c.findings) {
    json::object one;
    one["code"] = f.code;
    one["message"] = f.message;
    one["evidence"] = f.evidence;
    findings.push_back(std::move(one));
  }
  o["findings"] = std::move(findings);
  const bool calibrated =
      std::any_of(c.shunts.begin(), c.shunts.end(), [](const auto& s) { return s.measured(); });
  o["span_ratio"] = calibrated ? number(c.spanRatio) : json::value(nullptr);
  o["span_expanded_uncertainty_percent"] = calibrated && !c.budget.lines.empty()
                                               ? number(c.budget.expandedUncertainty_percent)
                                               : json::value(nullptr);
  o["lead_resistance_ohm"] = c.leadResistance ? number(c.leadResistance->in(ohm)) : json::value(nullptr);
  o["lead_expanded_uncertainty_ohm"] =
      c.leadUncertainty ? number(c.leadUncertainty->in(ohm)) : json::value(nullptr);
  o["leads"] = c.leads ? leadsJson(*c.leads) : json::value(nullptr);
  o["zero_mV_per_V"] = mVperV(c.zero);
  o["zero_reading_expanded_uncertainty_mV_per_V"] = mVperV(c.zeroReadingUncertainty);
  o["zero_expanded_uncertainty_microstrain"] = number(c.zeroExpandedUncertainty.in(microstrain));
  json::array levels;
  for (const auto& at : c.strainUncertainty) {
    json::object one;
    one["level_microstrain"] = number(at.level.in(microstrain));
    one["expanded_microstrain"] = number(at.expanded.in(microstrain));
    one["expanded_with_gauge_factor_microstrain"] = number(at.expandedWithFactor.in(microstrain));
    levels.push_back(std::move(one));
  }
  o["strain_uncertainty"] = std::move(levels);
  o["gauge_factor_expanded_uncertainty_percent"] = number(c.factorUncertainty_percent);
  o["unit"] = c.unit;
  o["units_per_strain"] = number(c.unitsPerStrain);
  o["lost_samples"] = c.lostSamples;
  json::array shunts;
  for (const auto& s : c.shunts) shunts.push_back(shuntJson(s));
  o["shunts"] = std::move(shunts);
  o["straightness"] = c.straightness ? straightnessJson(*c.straightness) : json::value(nullptr);
  json::object correction;
  correction["p"] = number(c.correction.p);
  correction["q"] = number(c.correction.q);
  correction["w"] = number(c.correction.w);
  if (!c.correction.isMoebius()) {
    json::array bend;
    for (const double b : c.correction.bend) bend.push_back(number(b));
    correction["bend"] = std::move(bend);
  }
  o["correction"] = std::move(correction);
  o["worst_map_error_microstrain"] = number(c.worstMapError.in(microstrain));
  o["budget"] = budgetJson(c.budget);
  return o;
}

}  // namespace

std::string recordJson(const Record& record) {
  json::object o;
  o["record_id"] = record.id;
  o["started"] = rfc3339(record.started);
  o["started_unix_ns"] = record.started.time_since_epoch().count();
  o["software"] = record.software;
  o["rack"] = record.rackName;
  o["rack_file"] = record.rackFile;
  json::array devices;
  for (const auto& d : record.devices) {
    json::object one;
    one["name"] = d.name;
    one["model"] = d.model;
    one["serial"] = d.serialNumber;
    devices.push_back(std::move(one));
  }
  o["devices"] = std::move(devices);
  json::array channels;
  for (const auto& channel : record.channels) channels.push_back(channelJson(channel));
  o["channels"] = std::move(channels);
  o["windows"] = record.windows;
  o["duration_s"] = number(seconds(record.duration));
  o["zeroed"] = record.zeroed ? json::value(rfc3339(*record.zeroed)) : json::value(nullptr);
  o["zeroed_unix_ns"] =
      record.zeroed ? json::value(record.zeroed->time_since_epoch().count()) : json::value(nullptr);
  json::array relays;
  for (const auto& relay : record.relaysMaybeClosed) relays.push_back(json::value(relay));
  o["relays_maybe_closed"] = std::move(relays);
  return json::serialize(o);
}

// ---------------------------------------------------------------- reading back

namespace {

double get(const json::object& o, const char* key) {
  const auto& v = o.at(key);
  return v.is_null() ? std::numeric_limits<double>::quiet_NaN() : v.to_number<double>();
}

std::string word(const json::object& o, const char* key) {
  return std::string(o.at(key).as_string());
}

Ratio ratioIn(const json::object& o, const char* key) {
  return get(o, key) * millivolt_per_volt;
}

Verdict verdictNamed(const std::string& text) {
  for (const Verdict v : {Verdict::pass, Verdict::fail, Verdict::not_calibrated}) {
    if (text == name(v)) return v;
  }
  throw std::invalid_argument("unknown verdict \"" + text + "\"");
}

ShuntResult shuntFrom(const json::object& o) {
  ShuntResult s;
  s.name = word(o, "name");
  s.before = ratioIn(o, "before_mV_per_V");
  s.after = ratioIn(o, "after_mV_per_V");
  s.returned = ratioIn(o, "return_mV_per_V");
  s.measuredStep = ratioIn(o, "measured_step_mV_per_V");
  s.predictedStep = ratioIn(o, "predicted_step_mV_per_V");
  s.stepDeviation = ratioIn(o, "step_deviation_mV_per_V");
  s.noise = ratioIn(o, "noise_mV_per_V");
  s.residual = ratioIn(o, "residual_mV_per_V");
  s.deviationUncertainty = get(o, "step_expanded_uncertainty_percent") * percent;
  s.returnUncertainty = ratioIn(o, "return_expanded_uncertainty_mV_per_V");
  s.noiseUncertainty = ratioIn(o, "noise_expanded_uncertainty_mV_per_V");
  s.settling = fromSeconds(get(o, "settling_s"));
  s.repeats = static_cast<int>(o.at("repeats").to_number<int>());
  return s;
}

LeadIdentification leadsFrom(const json::object& o) {
  LeadIdentification found;
  found.identifiable = o.at("identifiable").as_bool();
  found.reason = word(o, "reason");
  found.resistance = get(o, "resistance_ohm") * ohm;
  found.expandedUncertainty = get(o, "expanded_uncertainty_ohm") * ohm;
  found.stated = get(o, "stated_ohm") * ohm;
  found.spanStandardUncertainty = get(o, "span_standard_uncertainty");
  found.correlation = get(o, "correlation_with_span");
  found.condition = get(o, "condition");
  found.degreesOfFreedom = get(o, "degrees_of_freedom");
  found.probability = get(o, "probability");
  for (const auto& v : o.at("leads").as_array()) {
    const auto& one = v.as_object();
    const auto terminal = description::terminalNamed(word(one, "terminal"));
    found.leads.push_back({terminal.value_or(description::Terminal::exc_plus),
                           get(one, "resistance_ohm") * ohm, get(one, "expanded_uncertainty_ohm") * ohm,
                           one.at("told_apart").as_bool()});
  }
  for (const auto& v : o.at("budget").as_array()) {
    found.budget.push_back({word(v.as_object(), "quantity"), get(v.as_object(), "contribution_ohm") * ohm});
  }
  if (!o.at("advice").is_null()) {
    found.advice = LeadAdvice{word(o, "advice"), get(o, "expanded_uncertainty_then_ohm") * ohm};
  }
  return found;
}

Budget budgetFrom(const json::object& o) {
  const double infinite = std::numeric_limits<double>::infinity();
  Budget b;
  for (const auto& v : o.at("lines").as_array()) {
    const auto& l = v.as_object();
    BudgetLine line;
    line.quantity = word(l, "quantity");
    line.value = get(l, "value");
    line.unit = word(l, "unit");
    line.distribution = word(l, "distribution");
    line.standardUncertainty = get(l, "standard_uncertainty");
    line.degreesOfFreedom = l.at("degrees_of_freedom").is_null() ? infinite : get(l, "degrees_of_freedom");
    line.sensitivity = get(l, "sensitivity_percent_per_unit");
    line.contribution_percent = get(l, "contribution_percent");
    b.lines.push_back(std::move(line));
  }
  b.standardUncertainty_percent = get(o, "standard_uncertainty_percent");
  const auto& degrees = o.at("effective_degrees_of_freedom");
  b.effectiveDegreesOfFreedom = degrees.is_null() ? infinite : degrees.to_number<double>();
  b.coverageFactor = get(o, "coverage_factor");
  b.expandedUncertainty_percent = get(o, "expanded_uncertainty_percent");
  return b;
}

ChannelResult channelFrom(const json::object& o) {
  ChannelResult c;
  c.name = word(o, "name");
  for (const auto& [what, value] : o.at("basis").as_object()) {
    c.basis[std::string(what)] = std::string(value.as_string());
  }
  c.verdict = verdictNamed(word(o, "verdict"));
  for (const auto& f : o.at("findings").as_array()) {
    const auto& one = f.as_object();
    c.findings.push_back({word(one, "code"), word(one, "message"), word(one, "evidence")});
  }
  if (!o.at("span_ratio").is_null()) c.spanRatio = get(o, "span_ratio");
  if (!o.at("lead_resistance_ohm").is_null()) c.leadResistance = get(o, "lead_resistance_ohm") * ohm;
  if (!o.at("lead_expanded_uncertainty_ohm").is_null()) {
    c.leadUncertainty = get(o, "lead_expanded_uncertainty_ohm") * ohm;
  }
  if (!o.at("leads").is_null()) c.leads = leadsFrom(o.at("leads").as_object());
  c.zero = ratioIn(o, "zero_mV_per_V");
  c.zeroReadingUncertainty = ratioIn(o, "zero_reading_expanded_uncertainty_mV_per_V");
  c.zeroExpandedUncertainty = get(o, "zero_expanded_uncertainty_microstrain") * microstrain;
  for (const auto& v : o.at("strain_uncertainty").as_array()) {
    const auto& at = v.as_object();
    c.strainUncertainty.push_back({get(at, "level_microstrain") * microstrain,
                                   get(at, "expanded_microstrain") * microstrain,
                                   get(at, "expanded_with_gauge_factor_microstrain") * microstrain});
  }
  c.factorUncertainty_percent = get(o, "gauge_factor_expanded_uncertainty_percent");
  c.unit = word(o, "unit");
  c.unitsPerStrain = get(o, "units_per_strain");
  c.lostSamples = o.at("lost_samples").to_number<int>();
  for (const auto& s : o.at("shunts").as_array()) c.shunts.push_back(shuntFrom(s.as_object()));
  if (!o.at("straightness").is_null()) {
    const auto& line = o.at("straightness").as_object();
    c.straightness = {get(line, "worst_residual_percent"), get(line, "expanded_uncertainty_percent"),
                      get(line, "chi_squared"), get(line, "degrees_of_freedom"), get(line, "probability")};
  }
  const auto& correction = o.at("correction").as_object();
  c.correction = {get(correction, "p"), get(correction, "q"), get(correction, "w")};
  if (const auto* bend = correction.if_contains("bend")) {
    for (std::size_t b = 0; b < c.correction.bend.size(); ++b) {
      c.correction.bend[b] = bend->as_array().at(b).to_number<double>();
    }
  }
  c.worstMapError = get(o, "worst_map_error_microstrain") * microstrain;
  c.budget = budgetFrom(o.at("budget").as_object());
  return c;
}

}  // namespace

Result<Record> parseRecordJson(std::string_view text, const std::string& where) {
  const char* remedy = "calibrate again, or name the file that calibrate wrote";
  boost::system::error_code ec;
  const json::value document = json::parse(json::string_view(text.data(), text.size()), ec);
  if (ec) return fail(ErrorCode::bad_file, "this is no calibration record: " + ec.message(), where, remedy);
  try {
    const auto& o = document.as_object();
    Record record;
    record.id = word(o, "record_id");
    record.started = Instant(Nanoseconds(o.at("started_unix_ns").to_number<std::int64_t>()));
    record.software = word(o, "software");
    record.rackName = word(o, "rack");
    record.rackFile = word(o, "rack_file");
    for (const auto& v : o.at("devices").as_array()) {
      const auto& d = v.as_object();
      record.devices.push_back({word(d, "name"), word(d, "model"), word(d, "serial")});
    }
    for (const auto& c : o.at("channels").as_array()) record.channels.push_back(channelFrom(c.as_object()));
    record.windows = o.at("windows").to_number<int>();
    record.duration = fromSeconds(get(o, "duration_s"));
    if (const auto& zeroed = o.at("zeroed_unix_ns"); !zeroed.is_null()) {
      record.zeroed = Instant(Nanoseconds(zeroed.to_number<std::int64_t>()));
    }
    for (const auto& r : o.at("relays_maybe_closed").as_array()) {
      record.relaysMaybeClosed.emplace_back(std::string(r.as_string()));
    }
    return record;
  } catch (const std::exception& e) {
    return fail(ErrorCode::bad_file, std::string("this calibration record lacks something: ") + e.what(),
                where, remedy);
  }
}

}  // namespace shuntwright::calibration
