#pragma once

// Heavy: for the sources of the Asio transports only.

#include <boost/asio/any_completion_handler.hpp>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/associated_cancellation_slot.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/buffer.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/error.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <boost/asio/write.hpp>
#include <memory>
#include <string>
#include <utility>

#include "driver/transport/stream.h"

namespace shuntwright::transport {

/// How an operation of the system ended.
struct IoOutcome {
  boost::system::error_code error;
  std::size_t bytes = 0;
  bool timedOut = false;
};

/// Awaits an Asio operation with a deadline on our own clock. Cancelling the awaiting coroutine throws; the
/// deadline and every other end are told by the outcome.
/// @param start  called once with a handler void(error_code, size_t) to be given to the operation
template <class Start>
Task<IoOutcome> withDeadline(Clock& clock, Instant deadline, Start start) {
  namespace asio = boost::asio;
  using boost::system::error_code;

  struct Operation {
    asio::cancellation_signal signal;
    asio::any_completion_handler<void(error_code, IoOutcome)> handler;
    bool timedOut = false;
    bool cancelled = false;
  };
  auto initiate = [&clock, deadline, start](auto handler) mutable {
    auto operation = std::make_shared<Operation>();
    auto slot = asio::get_associated_cancellation_slot(handler);
    // Asio 1.81's move assignment copies; swap does not.
    decltype(operation->handler)(std::move(handler)).swap(operation->handler);
    const std::weak_ptr<Operation> weak = operation;
    if (slot.is_connected()) {
      slot.assign([weak](asio::cancellation_type type) {
        const auto pending = weak.lock();
        if (!pending || type == asio::cancellation_type::none) return;
        pending->cancelled = true;
        pending->signal.emit(asio::cancellation_type::terminal);
      });
    }
    Clock::Ticket ticket = 0;
    if (deadline != Instant::max()) {
      ticket = clock.at(deadline, [weak] {
        const auto pending = weak.lock();
        if (!pending) return;
        pending->timedOut = true;
        pending->signal.emit(asio::cancellation_type::terminal);
      });
    }
    const auto alive = clock.alive();
    start(asio::bind_cancellation_slot(
        operation->signal.slot(), [operation, &clock, alive, ticket](error_code ec, std::size_t bytes) {
          if (ticket != 0 && !alive.expired()) clock.cancel(ticket);
          const bool aborted = ec == asio::error::operation_aborted;
          const IoOutcome outcome{ec, bytes, aborted && operation->timedOut};
          const error_code thrown = aborted && operation->cancelled ? ec : error_code();
          std::exchange(operation->handler, nullptr)(thrown, outcome);
        }));
  };
  // Named first: g++ 12 destroys captures twice when the lambda stands inside the co_await expression.
  auto waiting = asio::async_initiate<const asio::use_awaitable_t<>&, void(error_code, IoOutcome)>(
      initiate, asio::use_awaitable);
  co_return co_await std::move(waiting);
}

/// A stream over an Asio socket or serial port.
template <class Port>
class AsioStream final : public Stream {
 public:
  AsioStream(Clock& clock, std::string name, Port port)
      : clock_(clock), name_(std::move(name)), port_(std::make_shared<Port>(std::move(port))) {}
  ~AsioStream() override { close(); }

  Task<Result<std::size_t>> read(std::span<std::byte> into, Instant deadline) override {
    const auto port = port_;
    const std::string where = name_;
    auto start = [port, into](auto handler) {
      port->async_read_some(boost::asio::buffer(into.data(), into.size()), std::move(handler));
    };
    const IoOutcome outcome = co_await withDeadline(clock_, deadline, start);
    if (outcome.timedOut) co_return fail(ErrorCode::timeout, "nothing came in time", where);
    if (outcome.error) co_return std::unexpected(gone("reading", outcome.error, where));
    co_return outcome.bytes;
  }

  Task<Result<void>> write(ByteView bytes, Instant deadline) override {
    const auto port = port_;
    const std::string where = name_;
    auto start = [port, bytes](auto handler) {
      boost::asio::async_write(*port, boost::asio::buffer(bytes.data(), bytes.size()), std::move(handler));
    };
    const IoOutcome outcome = co_await withDeadline(clock_, deadline, start);
    if (outcome.timedOut) {
      co_return fail(ErrorCode::timeout,
                     "only " + std::to_string(outcome.bytes) + " of " + std::to_string(bytes.size()) +
                         " bytes could be written in time",
                     where, "see whether the device, or its flow control, holds the line");
    }
    if (outcome.error) co_return std::unexpected(gone("writing", outcome.error, where));
    co_return Result<void>{};
  }

  void close() override {
    boost::system::error_code ignored;
    port_->close(ignored);
  }

  std::string name() const override { return name_; }

 private:
  static Error gone(const char* doing, boost::system::error_code ec, const std::string& where) {
    if (ec == boost::asio::error::eof) return {ErrorCode::io, "the other end closed the connection", where};
    if (ec == boost::asio::error::operation_aborted || ec == boost::asio::error::bad_descriptor) {
      return {ErrorCode::io, "the connection was closed", where};
    }
    return {ErrorCode::io, std::string(doing) + " failed: " + ec.message(), where};
  }

  Clock& clock_;
  std::string name_;
  std::shared_ptr<Port> port_;  ///< shared with pending operations
};

}  // namespace shuntwright::transport
