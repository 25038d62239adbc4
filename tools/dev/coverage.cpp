#include "tools/dev/coverage.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>
#include <thread>

#include "driver/calibration/analysis.h"
#include "driver/calibration/identified_model.h"
#include "driver/metrology/first_order.h"
#include "driver/metrology/monte_carlo.h"
#include "sim/amplifier/bridge_input.h"

namespace shuntwright::dev {

using namespace units;
using namespace std::chrono_literals;
using description::Channel;
using description::Rack;

namespace {

constexpr std::array kParts{0.25, 0.5, 1.0};
constexpr std::array kQuantities{"span",
                                 "lead resistance",
                                 "strain at 0",
                                 "strain at 25 %",
                                 "strain at 50 %",
                                 "strain at 100 %",
                                 "100 % with gauge factor"};
constexpr std::size_t kSpan = 0, kLeads = 1, kLevels = 2, kWithFactor = kQuantities.size() - 1;
static_assert(kWithFactor == kLevels + 1 + kParts.size());
constexpr auto kAmong = 40min;  // from calibration to load

/// One quantity of one rack: by how much the truth differs from what was found, and what had been stated.
struct Score {
  double off = 0, gum = 0;
  metrology::Interval monteCarlo{std::numeric_limits<double>::quiet_NaN(), 0};
};
using Scores = std::array<Score, kQuantities.size()>;

sim::Scenario scenarioFor(const Channel& channel, const sim::Imperfections& imperfections) {
  sim::Scenario scenario;
  scenario.imperfections = imperfections;
  scenario.levels = {kParts.begin(), kParts.end()};
  scenario.ramp = 1s;
  scenario.hold = 6s;
  scenario.beam.warming = 0.0 * kelvin;
  scenario.imperfections.drift = Ratio();  // a limit, too: see DrawnRack
  if (channel.transducer) scenario.maxLoad = channel.transducer->ratedValue * kilonewton;
  return scenario;
}

/// One drawn rack on the simulator's amplifier.
class DrawnRack {
 public:
  DrawnRack(const Rack& truth, const Channel& channel, const CoverageOptions& options, Random random)
      : channel_(channel),
        told_(options.scatter),
        inputs_(*truth.device(channel.device)->profile->inputs),
        scenario_(scenarioFor(channel, options.imperfections)),
        specimen_(truth, scenario_, random.fork(1)) {
    clock_.start = VirtualClock::kDefaultStart;
    const double rate_Hz = truth.device(channel.device)->rate.value_or(100.0 * hertz).in(hertz);
    step_ = fromSeconds(1 / rate_Hz);
    // A limit is drawn as one: anywhere within it, at calibration and until the test.
    Random limits = random.fork(2);
    const sim::Imperfections& imperfections = options.imperfections;
    sim::Shared shared;
    shared.resistors = sim::drawnResistors(truth, imperfections, random.fork(5));
    sim::TrueChannel drawn(truth, channel, scenario_.imperfections, {}, random.fork(3), shared);
    double tolerance_K = 0;
    for (const auto& [terminal, lead] : channel.leads) {
      tolerance_K = std::max(tolerance_K, lead.temperatureTolerance.in(kelvin));
    }
    const double warmer = limits.uniform(-1, 1), warms = limits.uniform(-1, 1);
    drawn.hangIn(tolerance_K * warmer, tolerance_K * warms);
    for (auto& shunt : drawn.shunts()) {
      const auto& relays = *truth.device(shunt.described.relay.device)->profile->relays;
      shunt.contact_ohm = relays.contactResistance.in(ohm) +
                          limits.uniform(-1, 1) * imperfections.contacts * relays.contactTolerance.in(ohm);
    }
    wander_ = limits.uniform(-1, 1) * inputs_.zeroStability.in(volt_per_volt);
    input_.emplace(std::move(drawn), specimen_, clock_, inputs_, scenario_.imperfections,
                   sim::ChannelFaults{}, random.fork(4));
    now_ = clock_.start;
  }

  calibration::ChannelReadings calibrated(int windowSamples, int repeats) {
    calibration::ChannelReadings out;
    wait(1s);
    for (std::size_t k = 0; k < channel_.shunts.size(); ++k) {
      calibration::ShuntReadings readings;
      readings.opened.push_back(window(windowSamples));
      for (int r = 0; r < repeats; ++r) {
        switchShunt(k, true);
        readings.closed.push_back(window(windowSamples));
        switchShunt(k, false);
        readings.opened.push_back(window(windowSamples));
      }
      out.shunts.push_back(std::move(readings));
    }
    calibrated_ = now_;
    out.zero = window(windowSamples);
    return out;
  }

  void waitForTheTest() {
    wait(kAmong);
    loaded_ = true;
    zeroLater_ = window(32);
    clock_.loadStart = now_;
  }

  struct Held {
    double truth = 0;  ///< strain at the gauge
    calibration::Window reading;
  };
  /// Level 0 is no load, level k the k-th of kParts.
  Held held(std::size_t level, int samples) {
    if (level == 0) return {0, zeroLater_};
    wait(clock_.loadStart + 7s * static_cast<int>(level) - 2s - now_);
    const Instant before = now_;
    const auto reading = window(samples);
    return {input_->strainAt(before), reading};
  }

  double span() const { return input_->span(); }
  /// Mean of those that carry current, as warm as they were while the shunts were closed.
  Resistance leadsAtCalibration() const {
    const double warmth = input_->channel().leadWarming_K(seconds(calibrated_ - clock_.start));
    double sum_ohm = 0;
    int count = 0;
    for (const auto& [terminal, lead] : channel_.leads) {
      if (!description::carriesCurrent(channel_.circuit, terminal)) continue;
      sum_ohm += input_->channel().lead_ohm(terminal, warmth);
      ++count;
    }
    return sum_ohm / std::max(1, count) * ohm;
  }
  double factor() const { return input_->channel().gaugeFactor(); }

 private:
  void wait(Nanoseconds time) {
    // The input's filter has to see what changed meanwhile.
    constexpr int kSettling = 20;
    now_ += time - kSettling * step_;
    for (int s = 0; s < kSettling; ++s) {
      now_ += step_;
      input_->sample(now_);
    }
  }

  void switchShunt(std::size_t k, bool closed) {
    now_ += 10ms;
    input_->touch(now_);
    input_->channel().shunts()[k].closed = closed;
    input_->contactChanged(now_, closed);
    now_ += 500ms;
  }

  calibration::Window window(int samples) {
    calibration::WindowBuilder builder;
    const double digit = inputs_.resolution.in(volt_per_volt);
    for (int s = 0; s < samples; ++s) {
      now_ += step_;
      double shown = input_->sample(now_) + (loaded_ ? wander_ : 0);
      if (digit > 0) shown = std::round(shown / digit) * digit;
      builder.add(now_, static_cast<float>(shown), 0);
    }
    auto window = builder.window();
    window.deviation = window.deviation * told_;
    return window;
  }

  const Channel& channel_;
  const double told_;
  const description::Inputs& inputs_;
  const sim::Scenario scenario_;
  const sim::Specimen specimen_;
  sim::LoadClock clock_;
  std::optional<sim::BridgeInput> input_;
  Nanoseconds step_;
  Instant now_, calibrated_;
  bool loaded_ = false;
  double wander_ = 0;  ///< of the amplifier's offset until the test
  calibration::Window zeroLater_;
};

double strainIn(const calibration::ChannelResult& found, const calibration::Window& reading) {
  return found.correction.strainAt(reading.mean.in(volt_per_volt));
}

Result<Scores> scored(const Rack& rack, const Channel& channel, const CoverageOptions& options, int number) {
  const Rack& truth = options.truth ? *options.truth : rack;
  const Random random = Random(options.seed).fork(static_cast<std::uint64_t>(number));
  DrawnRack drawn(truth, *truth.channel(channel.name), options, random);
  calibration::Behind behind;
  const auto readings = drawn.calibrated(rack.calibration.windowSamples, rack.calibration.repeats);
  const auto found = calibration::analyse(rack, channel, readings, &behind);
  if (found.strainUncertainty.empty()) {
    return fail(ErrorCode::bad_use, "the channel could not be analysed",
                found.findings.empty() ? channel.name : found.findings.back().evidence);
  }
  drawn.waitForTheTest();

  const double nominal = channel.transducer ? 1 : rack.gaugeOf(channel).factor.value();
  const double factor = drawn.factor() / nominal;
  Scores scores;
  scores[kSpan].off = 100 * (drawn.span() / found.spanRatio - 1);
  std::vector<Strain> levels;
  for (std::size_t level = 0; level <= kParts.size(); ++level) {
    const auto [strainThere, reading] = drawn.held(level, rack.calibration.windowSamples);
    const double shown = strainIn(found, reading);
    levels.push_back(shown * strain);
    scores[kLevels + level].off = strainThere - shown / factor;
    scores[kWithFactor].off = strainThere - shown;
  }
  const auto model = behind.fit
                         ? calibration::identifiedModel(*behind.fit, rack, channel, behind.readings, levels)
                         : calibration::strainModel(rack, channel, behind.readings, levels);
  if (!model) return std::unexpected(model.error());
  const auto stated = calibration::strainUncertainties(
      *model, levels, calibration::factorTolerance(rack, channel), behind.readings.zeroSecondOrderVariance);
  if (!stated) return std::unexpected(stated.error());
  for (std::size_t level = 0; level < levels.size(); ++level) {
    scores[kLevels + level].gum = (*stated)[level].expanded.in(strain);
    scores[kWithFactor].gum = (*stated)[level].expandedWithFactor.in(strain);
  }
  const auto first = metrology::firstOrder(*model);
  if (!first) return std::unexpected(first.error());
  scores[kSpan].gum = metrology::shapedHalfWidth(*model, first->outputs[calibration::Claims::kSpan]);
  if (behind.fit) {
    scores[kLeads].off = (drawn.leadsAtCalibration() - *found.leadResistance).in(ohm);
    scores[kLeads].gum = found.leadUncertainty->in(ohm);
  }
  if (options.trials == 0) return scores;
  Random own = random.fork(99);
  metrology::MonteCarloOptions wanted;
  wanted.trials = static_cast<std::size_t>(options.trials);
  const auto trials = metrology::monteCarlo(*model, own, wanted);
  if (!trials) return std::unexpected(trials.error());
  const auto interval = [&](std::size_t output) { return trials->outputs[output].interval.symmetric; };
  scores[kSpan].monteCarlo = interval(calibration::Claims::kSpan);
  if (behind.fit) scores[kLeads].monteCarlo = interval(trials->outputs.size() - 1);
  for (std::size_t level = 0; level < levels.size(); ++level) {
    scores[kLevels + level].monteCarlo = interval(calibration::Claims::kStrains + level);
  }
  return scores;
}

Coverage summary(const char* quantity, const std::vector<Scores>& all, std::size_t k) {
  Coverage out;
  out.quantity = quantity;
  out.racks = static_cast<int>(all.size());
  std::vector<double> off, stated;
  int gum = 0, drawn = 0;
  for (const Scores& scores : all) {
    const Score& s = scores[k];
    off.push_back(std::abs(s.off));
    stated.push_back(s.gum);
    gum += std::abs(s.off) <= s.gum;
    drawn += s.monteCarlo.low <= s.off && s.off <= s.monteCarlo.high;
  }
  std::ranges::sort(off);
  std::ranges::sort(stated);
  const double count = static_cast<double>(all.size());
  out.gum_percent = 100 * gum / count;
  const bool asked = !std::isnan(all.front()[k].monteCarlo.low);
  out.monteCarlo_percent = asked ? 100 * drawn / count : std::numeric_limits<double>::quiet_NaN();
  out.medianWidth = stated[stated.size() / 2] / off[static_cast<std::size_t>(0.9545 * count)];
  return out;
}

}  // namespace

Result<std::vector<Coverage>> coverageOf(const Rack& rack, const std::string& name,
                                         const CoverageOptions& options) {
  const Channel& channel = *rack.channel(name);
  std::vector<Scores> all(static_cast<std::size_t>(options.racks));
  std::vector<std::optional<Error>> errors(2);
  {
    std::vector<std::jthread> workers;
    for (int half = 0; half < 2; ++half) {
      workers.emplace_back([&, half] {
        for (int number = half; number < options.racks; number += 2) {
          auto scores = scored(rack, channel, options, number);
          if (!scores) {
            errors[static_cast<std::size_t>(half)] =
                std::move(scores.error()).wrap("rack " + std::to_string(number) + " of channel " + name);
            return;
          }
          all[static_cast<std::size_t>(number)] = *scores;
        }
      });
    }
  }
  for (auto& error : errors) {
    if (error) return std::unexpected(std::move(*error));
  }
  std::vector<Coverage> out;
  for (std::size_t k = 0; k < kQuantities.size(); ++k) {
    if (k == kLeads && channel.leadLoss != description::LeadLoss::identified) continue;
    out.push_back(summary(kQuantities[k], all, k));
  }
  return out;
}

}  // namespace shuntwright::dev
