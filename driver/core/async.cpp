#include "driver/core/async.h"

#include <algorithm>
#include <boost/asio/any_completion_handler.hpp>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/associated_cancellation_slot.hpp>
#include <boost/asio/associated_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/bind_cancellation_slot.hpp>
#include <boost/asio/cancellation_signal.hpp>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/error.hpp>
#include <boost/asio/post.hpp>
#include <boost/asio/this_coro.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <exception>

namespace shuntwright {

namespace asio = boost::asio;
using boost::system::error_code;

struct Event::Waiter {
  asio::any_completion_handler<void(error_code, bool)> handler;
  asio::any_io_executor executor;
  std::weak_ptr<Waiters> waiters;
  Clock* clock = nullptr;
  std::weak_ptr<const void> clockAlive;
  Clock::Ticket ticket = 0;

  ~Waiter() { forgetDeadline(); }

  /// The clock knows a waiter by its address only, so none goes while its ticket stands.
  void forgetDeadline() {
    if (ticket != 0 && !clockAlive.expired()) clock->cancel(ticket);
    ticket = 0;
  }

  void finish(error_code ec, bool notified) {
    if (!handler) return;
    forgetDeadline();
    asio::post(executor, [h = std::exchange(handler, nullptr), ec, notified]() mutable {
      std::move(h)(ec, notified);
    });
  }

  /// Ends the wait from outside the notifications: by cancellation or at its deadline.
  void give(error_code ec) {
    std::shared_ptr<Waiter> alive;
    if (const auto list = waiters.lock()) {
      const auto own = std::find_if(list->begin(), list->end(), [this](const auto& one) { return one.get() == this; });
      if (own != list->end()) {
        alive = std::move(*own);
        list->erase(own);
      }
    }
    finish(ec, false);
  }
};

Event::Event() : waiters_(std::make_shared<Waiters>()) {}

Event::~Event() {
  const auto left = std::exchange(*waiters_, {});
  for (const auto& waiter : left) waiter->finish(asio::error::operation_aborted, false);
}

Task<bool> Event::waitOn(const std::shared_ptr<Waiters>& waiters, Clock* clock, Instant deadline) {
  auto initiate = [waiters, clock, deadline](auto handler) {
    auto waiter = std::make_shared<Waiter>();
    waiter->executor = asio::get_associated_executor(handler);
    waiter->waiters = waiters;
    auto slot = asio::get_associated_cancellation_slot(handler);
    // Asio 1.81's move assignment copies; swap does not.
    decltype(waiter->handler)(std::move(handler)).swap(waiter->handler);
    waiters->push_back(waiter);
    const std::weak_ptr<Waiter> weak = waiter;
    if (slot.is_connected()) {
      slot.assign([weak](asio::cancellation_type type) {
        if (type == asio::cancellation_type::none) return;
        if (const auto pending = weak.lock()) pending->give(asio::error::operation_aborted);
      });
    }
    if (clock && deadline != Instant::max()) {
      waiter->clock = clock;
      waiter->clockAlive = clock->alive();
      // A pointer fits into the function without memory of its own.
      waiter->ticket = clock->at(deadline, [pending = waiter.get()] {
        pending->ticket = 0;
        pending->give({});
      });
    }
  };
  return asio::async_initiate<const asio::use_awaitable_t<>&, void(error_code, bool)>(std::move(initiate),
                                                                                      asio::use_awaitable);
}

Task<void> Event::wait() {
  co_await waitOn(waiters_, nullptr, Instant::max());
}

Task<bool> Event::wait(Clock& clock, Instant deadline) {
  return waitOn(waiters_, &clock, deadline);
}

void Event::notifyAll() {
  if (waiters_->empty()) return;
  // Waking only posts, so nobody comes back here meanwhile; the list keeps its room.
  static thread_local Waiters woken;
  woken.swap(*waiters_);
  for (const auto& waiter : woken) waiter->finish({}, true);
  woken.clear();
}

AsyncMutex::Lock& AsyncMutex::Lock::operator=(Lock&& other) noexcept {
  if (this != &other) {
    release();
    mutex_ = std::exchange(other.mutex_, nullptr);
  }
  return *this;
}

void AsyncMutex::Lock::release() {
  if (!mutex_) return;
  mutex_->held_ = false;
  mutex_->freed_.notifyAll();
  mutex_ = nullptr;
}

Task<AsyncMutex::Lock> AsyncMutex::lock() {
  const std::uint64_t turn = nextTurn_++;
  turns_.push_back(turn);
  while (held_ || turns_.front() != turn) {
    std::exception_ptr stopped;
    try {
      co_await freed_.wait();
    } catch (...) {
      stopped = std::current_exception();
    }
    if (stopped) {
      std::erase(turns_, turn);
      freed_.notifyAll();
      std::rethrow_exception(stopped);
    }
  }
  turns_.pop_front();
  held_ = true;
  co_return Lock(*this);
}

namespace {

struct Group {
  std::size_t running = 0;
  std::exception_ptr first;
  std::vector<std::unique_ptr<asio::cancellation_signal>> signals;
  Event ended;

  void cancelAll() {
    for (auto& signal : signals) signal->emit(asio::cancellation_type::all);
  }
};

}  // namespace

Task<void> whenAll(std::vector<std::function<Task<void>()>> bodies) {
  auto executor = co_await asio::this_coro::executor;
  auto group = std::make_shared<Group>();
  group->running = bodies.size();
  for (auto& body : bodies) {
    group->signals.push_back(std::make_unique<asio::cancellation_signal>());
    asio::co_spawn(executor, body,
                   asio::bind_cancellation_slot(group->signals.back()->slot(), [group](std::exception_ptr e) {
                     --group->running;
                     if (e && !group->first) {
                       group->first = e;
                       group->cancelAll();
                     }
                     group->ended.notifyAll();
                   }));
  }
  // Our own cancellation is passed on; the children are always awaited, since they use our frame.
  while (group->running > 0) {
    std::exception_ptr stopped;
    try {
      co_await group->ended.wait();
    } catch (...) {
      stopped = std::current_exception();
    }
    if (stopped) {
      if (!group->first) group->first = stopped;
      co_await asio::this_coro::reset_cancellation_state(asio::disable_cancellation());
      group->cancelAll();
      while (group->running > 0) co_await group->ended.wait();
      co_await asio::this_coro::reset_cancellation_state(asio::enable_terminal_cancellation());
    }
  }
  if (group->first) std::rethrow_exception(group->first);
}

Task<void> withoutCancellation(std::function<Task<void>()> body) {
  auto executor = co_await asio::this_coro::executor;
  auto ended = std::make_shared<Event>();
  struct State {
    bool done = false;
    std::exception_ptr error;
  };
  auto state = std::make_shared<State>();
  asio::co_spawn(executor, body, [state, ended](std::exception_ptr e) {
    state->error = e;
    state->done = true;
    ended->notifyAll();
  });
  // The child has its own cancellation state (none). A cancellation that hits us is remembered and
  // thrown on once the child has ended.
  std::exception_ptr stopped;
  while (!state->done) {
    try {
      co_await ended->wait();
    } catch (...) {
      stopped = std::current_exception();
    }
    if (stopped && !state->done) {
      co_await asio::this_coro::reset_cancellation_state(asio::disable_cancellation());
      while (!state->done) co_await ended->wait();
      co_await asio::this_coro::reset_cancellation_state(asio::enable_terminal_cancellation());
    }
  }
  if (state->error) std::rethrow_exception(state->error);
  if (stopped) std::rethrow_exception(stopped);
}

}  // namespace shuntwright
