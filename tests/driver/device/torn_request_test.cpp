// proves P-07
// A request that was cut off while it was written (a line held by flow control, a cancelled write) must not
// spoil the next one: that may be the one that opens a relay.
#include "scripted_device.h"

namespace shuntwright::test {
namespace {

/// No answers, no echo, no read-back: nothing would tell that a command was lost.
constexpr const char* kMuteBoard = R"(
[text]
request_end = "\n"
answer_end = "\n"
timeout = "20 ms"
retries = 2
[relays]
count = 20
close = { ask = "CLOSE {relay}" }
open = { ask = "OPEN {relay}" }
)";

/// Sends only the first bytes of one write.
class TearingStream final : public transport::Stream {
 public:
  TearingStream(std::unique_ptr<transport::Stream> inner, int& tearAt)
      : inner_(std::move(inner)), tearAt_(tearAt) {}
  Task<Result<std::size_t>> read(std::span<std::byte> into, Instant deadline) override {
    return inner_->read(into, deadline);
  }
  Task<Result<void>> write(ByteView bytes, Instant deadline) override {
    if (tearAt_ < 0) co_return co_await inner_->write(bytes, deadline);
    const ByteView beginning = bytes.first(static_cast<std::size_t>(std::exchange(tearAt_, -1)));
    co_await inner_->write(beginning, deadline);
    co_return fail(ErrorCode::timeout, "only a part could be written in time");
  }
  void close() override { inner_->close(); }
  std::string name() const override { return inner_->name(); }

 private:
  std::unique_ptr<transport::Stream> inner_;
  int& tearAt_;
};

class TornRequest : public DeviceTest {
 protected:
  int tearAt = -1;

  void openTearing() {
    profile(kMuteBoard);
    transport::Opener opener = [this](const description::Device& to) { return tearing(to); };
    run([&]() -> Task<void> {
      auto opened = co_await device::Device::open(described, opener, clock);
      EXPECT_TRUE(opened) << opened.error().text();
      if (opened) device = std::move(*opened);
    });
  }
  Task<Result<std::unique_ptr<transport::Stream>>> tearing(const description::Device& to) {
    auto opener = wire.opener();
    auto inner = co_await opener(to);
    std::unique_ptr<transport::Stream> stream = std::make_unique<TearingStream>(std::move(*inner), tearAt);
    co_return stream;
  }
  Result<void> openRelay(int relay) {
    return await<void>([this, relay] { return device->openRelay(relay); });
  }
};

TEST_F(TornRequest, TheNextRequestArrivesWholeWhereverTheOneBeforeWasCutOff) {
  for (int at = 0; at <= 8; ++at) {
    wire.requests.clear();
    openTearing();
    tearAt = at;
    ASSERT_FALSE(closeRelay(12)) << at;
    ASSERT_TRUE(openRelay(12)) << at;
    pass(1ms);
    ASSERT_FALSE(wire.requests.empty()) << at;
    EXPECT_EQ(wire.requests.back(), "OPEN 12") << "cut off after " << at << " bytes";
    device.reset();
  }
}

// "CLOSE 12" cut off is "CLOSE 1": whoever keeps the book of closed relays has to know of it.
TEST_F(TornRequest, IsToldAndNotTriedAgain) {
  openTearing();
  tearAt = 7;
  const auto done = closeRelay(12);
  ASSERT_FALSE(done);
  EXPECT_NE(done.error().text().find("only a part"), std::string::npos) << done.error().text();
  EXPECT_NE(done.error().text().find("CLOSE 12"), std::string::npos) << done.error().text();
  pass(1ms);
  EXPECT_TRUE(wire.requests.empty());
}

}  // namespace
}  // namespace shuntwright::test
