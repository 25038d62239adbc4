#include "tests/support/virtual_bench.h"

#include <gtest/gtest.h>

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/co_spawn.hpp>
#include <stdexcept>

#include "driver/transport/tracing_stream.h"
#include "tools/simhost/serve.h"

namespace shuntwright::test {

namespace asio = boost::asio;

description::Rack shippedRack(const std::string& name) {
  description::Diagnostics diagnostics;
  auto rack = description::loadRack(std::string(SHUNTWRIGHT_SOURCE_DIR) + "/profiles/racks/" + name,
                                    description::diskReader(), diagnostics);
  if (!rack) throw std::runtime_error(diagnostics.render(false));
  return std::move(*rack);
}

VirtualBench::VirtualBench(description::Rack described, sim::Scenario scenario, std::uint64_t seed,
                           std::optional<description::Rack> real)
    : rack(std::move(described)), real_(std::move(real)), seed_(seed) {
  bench = std::make_unique<sim::Bench>(real_ ? *real_ : rack, scenario, seed, clock.now());
}

VirtualBench::~VirtualBench() = default;

rack::LoadPathPermit VirtualBench::permit(const description::Rack& rack) {
  return *rack::confirmLoadPath(rack, true, "test");
}

namespace {

struct Whole {
  static Task<Result<void>> run(VirtualBench* world, std::function<Task<Result<void>>(rack::LiveRack&)> body) {
    auto opener = simhost::memoryOpener(*world->bench, world->clock);
    if (!world->traceFile.empty()) {
      auto tracing = transport::tracingOpener(opener, world->traceFile, world->clock);
      if (!tracing) co_return std::unexpected(std::move(tracing.error()));
      opener = std::move(*tracing);
    }
    auto live = co_await rack::LiveRack::open(world->rack, opener, world->clock, world->journal);
    if (!live) co_return std::unexpected(std::move(live.error()));
    auto done = co_await body(**live);
    (*live)->close();
    co_return done;
  }
  static Task<void> store(VirtualBench* world, std::function<Task<Result<void>>(rack::LiveRack&)> body,
                          std::shared_ptr<Result<void>> out) {
    *out = co_await run(world, std::move(body));
  }
};

Task<Result<void>> calibrateInto(rack::LiveRack& live, std::uint64_t seed, calibration::Options options,
                                 std::shared_ptr<Result<calibration::Record>> out) {
  Random random(seed);
  const auto permit = VirtualBench::permit(live.described());
  *out = co_await calibration::calibrate(live, permit, random, options);
  co_return Result<void>{};
}

}  // namespace

Result<void> VirtualBench::onRack(std::function<Task<Result<void>>(rack::LiveRack&)> body) {
  asio::io_context context;
  auto out = std::make_shared<Result<void>>(fail(ErrorCode::cancelled, "it did not end"));
  std::exception_ptr thrown;
  bool ended = false;
  asio::co_spawn(
      context, [this, body, out]() -> Task<void> { return Whole::store(this, body, out); },
      [&](std::exception_ptr e) {
        thrown = e;
        ended = true;
      });
  runVirtual(context, clock, [&] { return ended; });
  if (thrown) std::rethrow_exception(thrown);
  return *out;
}

Result<calibration::Record> VirtualBench::calibrate(calibration::Options options) {
  auto record = std::make_shared<Result<calibration::Record>>(fail(ErrorCode::cancelled, "it did not end"));
  auto done = onRack([this, options, record](rack::LiveRack& live) -> Task<Result<void>> {
    return calibrateInto(live, seed_, options, record);
  });
  if (!done) return std::unexpected(std::move(done.error()));
  return *record;
}

std::optional<std::string> VirtualBench::calibrateCancelledAfter(std::size_t steps, Grain grain) {
  asio::io_context context;
  auto record = std::make_shared<Result<calibration::Record>>(fail(ErrorCode::cancelled, "it did not end"));
  auto out = std::make_shared<Result<void>>();
  std::exception_ptr thrown;
  bool ended = false;
  asio::cancellation_signal signal;
  const std::function<Task<Result<void>>(rack::LiveRack&)> body =
      [this, record](rack::LiveRack& live) -> Task<Result<void>> {
    return calibrateInto(live, seed_, calibration::Options(), record);
  };
  asio::co_spawn(
      context, [this, body, out]() -> Task<void> { return Whole::store(this, body, out); },
      asio::bind_cancellation_slot(signal.slot(), [&](std::exception_ptr e) {
        thrown = e;
        ended = true;
      }));
  steps_ = 0;
  bool cancelled = false;
  while (!ended) {
    context.restart();
    for (;;) {
      if (grain == Grain::handler && steps_ == steps && !cancelled) {
        cancelled = true;
        signal.emit(asio::cancellation_type::terminal);
      }
      if (ended || context.poll_one() == 0) break;
      if (grain == Grain::handler) ++steps_;
    }
    if (ended) break;
    if (grain == Grain::handler) {
      if (!clock.advance()) break;
      continue;
    }
    if (steps_ == steps && !cancelled) {
      cancelled = true;
      signal.emit(asio::cancellation_type::terminal);
      continue;
    }
    if (!clock.advance()) break;
    ++steps_;
  }
  // What the connections left behind runs out.
  runVirtual(context, clock, [&] { return clock.next() > clock.now() + std::chrono::seconds(60); });
  if (!cancelled) return std::nullopt;
  if (!thrown) return "not thrown";
  try {
    std::rethrow_exception(thrown);
  } catch (const std::exception& e) {
    return e.what();
  }
}

}  // namespace shuntwright::test
