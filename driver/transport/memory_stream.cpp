#include "driver/transport/memory_stream.h"

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>

#include "driver/core/async.h"

namespace shuntwright::transport {

namespace {

/// One direction.
struct Pipe {
  Bytes bytes;
  std::size_t taken = 0;  ///< of the front of `bytes`
  bool closed = false;
  Event changed;

  void close() {
    closed = true;
    changed.notifyAll();
  }
};

class MemoryStream final : public Stream {
 public:
  MemoryStream(Clock& clock, std::string name, std::shared_ptr<Pipe> in, std::shared_ptr<Pipe> out)
      : clock_(clock), name_(std::make_shared<const std::string>(std::move(name))), in_(std::move(in)), out_(std::move(out)) {}
  ~MemoryStream() override { close(); }

  Task<Result<std::size_t>> read(std::span<std::byte> into, Instant deadline) override {
    const auto in = in_;
    const auto own = closed_;
    const auto where = name_;
    for (;;) {
      if (*own) co_return fail(ErrorCode::io, "the connection was closed", *where);
      if (in->taken < in->bytes.size()) break;
      if (in->closed) co_return fail(ErrorCode::io, "the other end closed the connection", *where);
      const bool woken = co_await in->changed.wait(clock_, deadline);
      if (!woken && !*own && in->taken == in->bytes.size() && !in->closed) {
        co_return fail(ErrorCode::timeout, "nothing came in time", *where);
      }
    }
    const std::size_t count = std::min(into.size(), in->bytes.size() - in->taken);
    std::copy_n(in->bytes.begin() + static_cast<std::ptrdiff_t>(in->taken), count, into.begin());
    in->taken += count;
    if (in->taken == in->bytes.size()) {
      in->bytes.clear();
      in->taken = 0;
    }
    co_return count;
  }

  Task<Result<void>> write(ByteView bytes, Instant) override {
    if (*closed_) co_return fail(ErrorCode::io, "the connection was closed", *name_);
    if (out_->closed) co_return fail(ErrorCode::io, "the other end closed the connection", *name_);
    append(out_->bytes, bytes);
    out_->changed.notifyAll();
    co_return Result<void>{};
  }

  void close() override {
    if (*closed_) return;
    *closed_ = true;
    in_->close();
    out_->close();
  }

  std::string name() const override { return *name_; }

 private:
  Clock& clock_;
  std::shared_ptr<const std::string> name_;  ///< outlives a read that the stream does not
  std::shared_ptr<Pipe> in_;
  std::shared_ptr<Pipe> out_;
  std::shared_ptr<bool> closed_ = std::make_shared<bool>(false);
};

}  // namespace

StreamPair memoryPair(Clock& clock, std::string name) {
  auto there = std::make_shared<Pipe>();
  auto back = std::make_shared<Pipe>();
  return {std::make_unique<MemoryStream>(clock, name, back, there),
          std::make_unique<MemoryStream>(clock, name, there, back)};
}

}  // namespace shuntwright::transport
