#include "driver/transport/failing_stream.h"
#include "scripted_device.h"

namespace shuntwright::test {
namespace {

constexpr const char* kAmplifier = R"(
[text]
request_end = "\n"
answer_end = "\n"
timeout = "20 ms"
retries = 1
gap = "1 ms"
[inputs]
count = 2
gives = "mV/V"
full_scale = "4 mV/V"
completions = [{ value = "120 ohm", tolerance = "0.1 %" }]
excitations = ["5 V"]
rates = ["100 Hz"]
read = { ask = "RD", answer = "RD {values:,}" }
[relays]
count = 2
close = { ask = "CLOSE {relay}", answer = "OK" }
open = { ask = "OPEN {relay}", answer = "OK" }
)";

/// A short session with everything in it, stopped at each millisecond in turn, or with each operation of the
/// stream failing in turn. Whatever happens, the relay can be opened afterwards, or the failure is told.
class Interruption : public DeviceTest {
 protected:
  bool relayOne = false;
  Result<void> sessionResult;

  void begin() {
    profile(kAmplifier);
    relayOne = false;
    wire.answer = [this](const std::string& request) {
      if (request == "RD") return std::vector<Piece>{{3ms, "RD 1.0,2.0\n"}};
      if (request == "CLOSE 1") relayOne = true;
      if (request == "OPEN 1") relayOne = false;
      return std::vector<Piece>{{2ms, "OK\n"}};
    };
  }
  Task<Result<void>> session() {
    auto started = co_await device->start(100.0 * units::hertz);
    if (!started) co_return started;
    auto closed = co_await device->closeRelay(1);
    if (!closed) co_return closed;
    for (int k = 0; k < 3; ++k) {
      const Instant limit = clock.now() + 100ms;
      auto block = co_await device->next(limit);
      if (!block) co_return std::unexpected(std::move(block.error()));
    }
    co_return co_await device->stop();
  }
};

TEST_F(Interruption, CancelledAtAnyTimeTheRelayIsOpenedByTheNextRequest) {
  int finished = 0;
  for (int ms = 0; ms < 60; ++ms) {
    begin();
    open();
    boost::asio::cancellation_signal signal;
    bool ended = false, cancelled = false;
    boost::asio::co_spawn(
        context, [this]() -> Task<void> { sessionResult = co_await session(); },
        boost::asio::bind_cancellation_slot(signal.slot(), [&](std::exception_ptr e) {
          ended = true;
          cancelled = e != nullptr;
        }));
    clock.at(clock.now() + ms * 1ms + 500us, [&] { signal.emit(boost::asio::cancellation_type::terminal); });
    runVirtual(context, clock, [&] { return ended; });
    ASSERT_TRUE(ended);
    if (!cancelled) ++finished;
    const auto opened = await<void>([this] { return device->openAllRelays(); });
    EXPECT_TRUE(opened) << ms << ": " << opened.error().text();
    EXPECT_FALSE(relayOne) << ms;
    device.reset();
  }
  EXPECT_GT(finished, 0) << "the last ones should have come to their end";
  EXPECT_LT(finished, 60);
}

TEST_F(Interruption, WhicheverOperationOfTheStreamFailsItIsToldAndNothingHangs) {
  for (const auto kind : {transport::FailPoint::Kind::once, transport::FailPoint::Kind::from_then_on}) {
    for (std::uint64_t n = 1;; ++n) {
      ASSERT_LT(n, 200u);
      begin();
      auto point = std::make_shared<transport::FailPoint>();
      point->failAt = n;
      point->kind = kind;
      const auto opener = transport::failingOpener(wire.opener(), point);
      Result<void> result;
      run([&]() -> Task<void> {
        auto opened = co_await device::Device::open(described, opener, clock);
        if (!opened) {
          result = std::unexpected(std::move(opened.error()));
          co_return;
        }
        device = std::move(*opened);
        result = co_await session();
      });
      device.reset();
      if (point->count < n) {
        EXPECT_TRUE(result) << result.error().text();
        break;
      }
      if (!result) {
        EXPECT_EQ(result.error().code, ErrorCode::io) << n;
        EXPECT_NE(result.error().text().find("amp1"), std::string::npos) << result.error().text();
        EXPECT_NE(result.error().text().find("was made to fail"), std::string::npos) << result.error().text();
      }
    }
  }
}

TEST_F(Interruption, ADeviceMayBeTornDownWithItsContextInTheMiddleOfASession) {
  for (int ms = 0; ms < 40; ms += 3) {
    boost::asio::io_context ownContext;
    VirtualClock ownClock;
    ScriptedDevice ownWire(ownContext, ownClock);
    begin();
    ownWire.answer = wire.answer;
    std::unique_ptr<device::Device> own;
    boost::asio::co_spawn(
        ownContext,
        [&]() -> Task<void> {
          auto opened = co_await device::Device::open(described, ownWire.opener(), ownClock);
          own = std::move(*opened);
          co_await own->start(100.0 * units::hertz);
          for (;;) {
            co_await own->closeRelay(1);
            co_await own->next(Instant::max());
          }
        },
        boost::asio::detached);
    const Instant end = ownClock.now() + ms * 1ms;
    runVirtual(ownContext, ownClock, [&] { return ownClock.next() > end; });
  }
}

}  // namespace
}  // namespace shuntwright::test
