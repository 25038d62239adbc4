#include "driver/transport/failing_stream.h"

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>

namespace shuntwright::transport {

bool FailPoint::fails() {
  ++count;
  return failAt > 0 && (count == failAt || (kind == Kind::from_then_on && count > failAt));
}

namespace {

std::unexpected<Error> made(const FailPoint& point, const char* what, std::string where) {
  return fail(point.code, std::string(what) + " was made to fail", std::move(where));
}

class FailingStream final : public Stream {
 public:
  FailingStream(std::unique_ptr<Stream> inner, std::shared_ptr<FailPoint> point)
      : inner_(std::move(inner)), point_(std::move(point)) {}

  Task<Result<std::size_t>> read(std::span<std::byte> into, Instant deadline) override {
    if (point_->fails()) co_return made(*point_, "reading", inner_->name());
    co_return co_await inner_->read(into, deadline);
  }
  Task<Result<void>> write(ByteView bytes, Instant deadline) override {
    if (point_->fails()) co_return made(*point_, "writing", inner_->name());
    co_return co_await inner_->write(bytes, deadline);
  }
  void close() override { inner_->close(); }
  std::string name() const override { return inner_->name(); }

 private:
  std::unique_ptr<Stream> inner_;
  std::shared_ptr<FailPoint> point_;
};

}  // namespace

std::unique_ptr<Stream> failingStream(std::unique_ptr<Stream> inner, std::shared_ptr<FailPoint> point) {
  return std::make_unique<FailingStream>(std::move(inner), std::move(point));
}

namespace {

Task<Result<std::unique_ptr<Stream>>> openFailing(Opener inner, std::shared_ptr<FailPoint> point,
                                                  const description::Device& device) {
  using Opened = Result<std::unique_ptr<Stream>>;
  if (point->fails()) co_return Opened(made(*point, "opening", device.port.text));
  auto opened = co_await inner(device);
  if (!opened) co_return opened;
  co_return Opened(failingStream(std::move(*opened), point));
}

}  // namespace

Opener failingOpener(Opener inner, std::shared_ptr<FailPoint> point) {
  return [inner = std::move(inner), point = std::move(point)](const description::Device& device) {
    return openFailing(inner, point, device);
  };
}

}  // namespace shuntwright::transport
