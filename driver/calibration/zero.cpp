#include "driver/calibration/zero.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <cmath>
#include <cstdio>
#include <functional>

#include "driver/calibration/analysis.h"
#include "driver/calibration/uncertainty.h"
#include "driver/metrology/coverage.h"
#include "driver/rack/acquisition.h"

namespace shuntwright::calibration {

using namespace units;

namespace {

std::string inMicrostrain(double value) {
  char out[48];
  std::snprintf(out, sizeof out, "%.2f microstrain", value);
  return out;
}

/// How far the zero may move while it has to hold.
Result<Strain> uncertaintyOf(const description::Rack& rack, const description::Channel& channel,
                             const Window& zero, double span, Nanoseconds holds) {
  const auto& inputs = *rack.device(channel.device)->profile->inputs;
  ZeroScatter scatter;
  const double correlation = correlationSeen({&zero, 1}, correlationFactor(rack, channel));
  scatter.standardUncertainty = zero.deviation * std::sqrt(correlation / std::max(1, zero.samples)) / span;
  scatter.resolution = inputs.resolution;
  scatter.stability = inputs.zeroStability / span;
  scatter.leadsShare = std::clamp(seconds(holds) / 3600, 0.0, 1.0);
  auto standard = zeroUncertainty(rack, channel, zero.mean / span, scatter);
  if (!standard) return std::unexpected(std::move(standard.error()));
  return metrology::studentFactor(metrology::kInfinity) * standard->standard;
}

/// The same with another zero: its part of the squares is exchanged.
StrainUncertainty withZero(const StrainUncertainty& at, Strain before, Strain now) {
  const auto exchanged = [&](Strain whole) {
    const double w = whole.in(strain), b = before.in(strain), n = now.in(strain);
    return std::sqrt(std::max(0.0, w * w - b * b) + n * n) * strain;
  };
  return {at.level, exchanged(at.expanded), exchanged(at.expandedWithFactor)};
}

}  // namespace

Task<Result<Zeros>> takeZeros(rack::LiveRack& live, rack::LoadPathPermit permit, Nanoseconds span) {
  if (!live.relays().maybeClosed().empty()) {
    co_return fail(ErrorCode::refused, "a relay may be closed, and a shunt is no zero", live.described().file,
                   "open every relay with `shuntwright release`");
  }
  std::map<std::string, std::vector<WindowBuilder>> builders;
  for (const auto& device : live.described().devices) {
    if (const auto& inputs = device.profile->inputs)
      builders[device.name].resize(static_cast<std::size_t>(inputs->count));
  }
  rack::AcquisitionSink sink;
  std::optional<Error> trouble;
  sink.fault = [&trouble](const std::string&, const Error& error) {
    if (!trouble) trouble = error;
  };
  sink.block = [&builders](const std::string& device, device::SampleBlock& block) {
    auto& columns = builders.at(device);
    for (std::size_t frame = 0; frame < block.frames(); ++frame) {
      for (std::size_t k = 0; k < block.inputs; ++k) {
        if (block.flagsAt(frame, k) & device::kSwitching) continue;
        columns[k].add(block.time[frame], block.at(frame, k), block.flagsAt(frame, k));
      }
    }
  };
  Clock& clock = live.clock();
  const Instant end = clock.now() + span;
  const std::function<bool()> enough = [&] { return trouble || clock.now() >= end; };
  auto done = co_await rack::acquire(live, permit, sink, enough);
  if (!done) co_return std::unexpected(std::move(done.error()));
  if (trouble) co_return std::unexpected(std::move(*trouble));
  Zeros zeros;
  for (const auto& channel : live.described().channels) {
    const auto first = live.described().device(channel.device)->profile->inputs->first;
    zeros[channel.name] =
        builders.at(channel.device)[static_cast<std::size_t>(channel.input - first)].window();
  }
  co_return zeros;
}

std::vector<Finding> rezero(Record& record, const description::Rack& rack, const Zeros& zeros, Instant when,
                            Nanoseconds holds) {
  std::vector<Finding> findings;
  record.zeroed = when;
  for (auto& result : record.channels) {
    const auto* channel = rack.channel(result.name);
    if (!channel) continue;
    const auto found = zeros.find(result.name);
    if (isAbsolute(*channel)) {
      // Its correction stays, but what it shows now goes with the new zeros: a thermometer's gauges count
      // from it.
      if (found != zeros.end() && found->second.usable()) result.zero = found->second.mean;
      continue;
    }
    if (found == zeros.end() || !found->second.usable()) {
      findings.push_back(
          {"zero-not-taken", result.name + ": no usable zero reading; that of the calibration stays",
           found == zeros.end() ? ""
                                : std::to_string(found->second.saturated) + " samples saturated, " +
                                      std::to_string(found->second.missing) + " missing"});
      continue;
    }
    const Window& zero = found->second;
    const double span = result.spanRatio > 0.2 && result.spanRatio < 5 ? result.spanRatio : 1;
    const auto strainOf = [&](Ratio reading) {
      return 1e6 * result.correction.strainAt(reading.in(volt_per_volt));
    };
    const double moved = strainOf(zero.mean);
    const double drifted = strainOf(zero.mean + zero.drift) - moved;
    const double limit = rack.limits.zeroReturn.in(microstrain);
    if (!channel->transducer && std::abs(moved) > limit) {
      findings.push_back({"zero-moved", result.name + ": the zero has moved since the calibration",
                          "by " + inMicrostrain(moved) + ", limit " + inMicrostrain(limit)});
    }
    if (!channel->transducer && std::abs(drifted) > limit) {
      findings.push_back({"zero-unsteady", result.name + ": the reading moved while the zero was taken",
                          "by " + inMicrostrain(drifted) + ", limit " + inMicrostrain(limit)});
    }
    auto uncertainty = uncertaintyOf(rack, *channel, zero, span, holds);
    ChannelResult anew = result;
    // The circuit behind identified leads is not kept; a zero that drifts a little changes nothing but where
    // it is.
    const bool identified = channel->leadLoss == description::LeadLoss::identified;
    if (identified) anew.correction = result.correction.zeroedAt(zero.mean.in(volt_per_volt));
    auto corrected =
        identified ? Result<void>() : correct(*channel, modelOf(rack, *channel), span, zero.mean, anew);
    if (!uncertainty || !corrected) {
      const Error& error = uncertainty ? corrected.error() : uncertainty.error();
      findings.push_back({"zero-not-taken", result.name + ": " + error.message, error.remedy});
      continue;
    }
    anew.zero = zero.mean;
    anew.zeroExpandedUncertainty = *uncertainty;
    // The first level is no load: its width is worked out as the others' are, so that squares may be taken
    // apart.
    if (!result.strainUncertainty.empty()) {
      const Strain before = result.strainUncertainty.front().expanded;
      for (auto& level : anew.strainUncertainty) level = withZero(level, before, *uncertainty);
    }
    result = std::move(anew);
  }
  return findings;
}

}  // namespace shuntwright::calibration
