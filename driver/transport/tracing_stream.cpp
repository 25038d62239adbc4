#include "driver/transport/tracing_stream.h"

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <fstream>

#include "driver/transport/trace.h"

namespace shuntwright::transport {

namespace {

/// The file that the streams of a rack share.
class TraceFile {
 public:
  TraceFile(const std::string& file, Clock& clock)
      : out_(file, std::ios::binary), clock_(clock), start_(clock.now()) {
    out_ << traceHeader(start_) << std::flush;
  }
  bool good() const { return out_.good(); }
  void note(TraceEvent::Kind kind, const std::string& device, ByteView bytes = {}) {
    out_ << traceLine(kind, clock_.now() - start_, device, bytes);
    if (kind == TraceEvent::Kind::close || kind == TraceEvent::Kind::failure) out_.flush();
  }

 private:
  std::ofstream out_;
  Clock& clock_;
  Instant start_;
};

class TracingStream final : public Stream {
 public:
  TracingStream(std::unique_ptr<Stream> inner, std::string device, std::shared_ptr<TraceFile> file)
      : inner_(std::move(inner)), device_(std::move(device)), file_(std::move(file)) {
    file_->note(TraceEvent::Kind::open, device_);
  }
  ~TracingStream() override { close(); }

  Task<Result<std::size_t>> read(std::span<std::byte> into, Instant deadline) override {
    auto file = file_;
    const auto closed = closed_;
    const std::string device = device_;
    auto count = co_await inner_->read(into, deadline);
    if (count) {
      file->note(TraceEvent::Kind::read, device, into.first(*count));
    } else if (count.error().code != ErrorCode::timeout && !*closed) {
      file->note(TraceEvent::Kind::failure, device, bytesOf(count.error().message));
    }
    co_return count;
  }

  Task<Result<void>> write(ByteView bytes, Instant deadline) override {
    file_->note(TraceEvent::Kind::write, device_, bytes);
    co_return co_await inner_->write(bytes, deadline);
  }

  void close() override {
    if (*closed_) return;
    *closed_ = true;
    file_->note(TraceEvent::Kind::close, device_);
    inner_->close();
  }

  std::string name() const override { return inner_->name(); }

 private:
  std::unique_ptr<Stream> inner_;
  std::string device_;
  std::shared_ptr<TraceFile> file_;
  std::shared_ptr<bool> closed_ = std::make_shared<bool>(false);
};

Task<Result<std::unique_ptr<Stream>>> openTraced(Opener inner, std::shared_ptr<TraceFile> file,
                                                 const description::Device& device) {
  using Opened = Result<std::unique_ptr<Stream>>;
  auto opened = co_await inner(device);
  if (!opened) co_return opened;
  co_return Opened(std::make_unique<TracingStream>(std::move(*opened), device.name, file));
}

}  // namespace

Result<Opener> tracingOpener(Opener inner, const std::string& traceFile, Clock& clock) {
  auto file = std::make_shared<TraceFile>(traceFile, clock);
  if (!file->good()) {
    return fail(ErrorCode::io, "cannot write the trace", traceFile,
                "check that its folder exists and may be written");
  }
  return [inner = std::move(inner), file](const description::Device& device) {
    return openTraced(inner, file, device);
  };
}

}  // namespace shuntwright::transport
