#include "driver/core/clock.h"

#include <algorithm>
#include <boost/asio/any_completion_handler.hpp>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/associated_cancellation_slot.hpp>
#include <boost/asio/async_result.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/error.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/post.hpp>
#include <boost/asio/steady_timer.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <cstdio>
#include <ctime>
#include <unordered_map>

namespace shuntwright {

namespace asio = boost::asio;

std::string rfc3339(Instant when) {
  using namespace std::chrono;
  const auto ms = floor<milliseconds>(when);
  const auto day = floor<days>(ms);
  const year_month_day date(day);
  const hh_mm_ss time(ms - day);
  char out[64];
  std::snprintf(out, sizeof out, "%04d-%02u-%02uT%02d:%02d:%02d.%03dZ", static_cast<int>(date.year()),
                static_cast<unsigned>(date.month()), static_cast<unsigned>(date.day()),
                static_cast<int>(time.hours().count()), static_cast<int>(time.minutes().count()),
                static_cast<int>(time.seconds().count()), static_cast<int>(time.subseconds().count()));
  return out;
}

namespace {

/// One pending wait: fires from the clock or is cut short by cancellation, whichever comes first.
struct PendingWait {
  asio::any_completion_handler<void(boost::system::error_code)> handler;
  Clock* clock = nullptr;
  Clock::Ticket ticket = 0;

  void finish(boost::system::error_code ec) {
    if (!handler) return;
    auto done = std::move(handler);
    handler = nullptr;
    std::move(done)(ec);
  }
};

}  // namespace

Task<void> waitUntil(Clock& clock, Instant when) {
  auto executor = co_await asio::this_coro::executor;
  auto initiate = [&clock, when, executor](auto handler) {
    auto wait = std::make_shared<PendingWait>();
    wait->clock = &clock;
    auto slot = asio::get_associated_cancellation_slot(handler);
    // Asio 1.81's move assignment copies; swap does not.
    decltype(wait->handler)(std::move(handler)).swap(wait->handler);
    if (slot.is_connected()) {
      slot.assign([weak = std::weak_ptr<PendingWait>(wait), executor](asio::cancellation_type type) {
        if (type == asio::cancellation_type::none) return;
        if (auto pending = weak.lock()) {
          pending->clock->cancel(pending->ticket);
          asio::post(executor, [pending] { pending->finish(asio::error::operation_aborted); });
        }
      });
    }
    wait->ticket = clock.at(when, [wait] { wait->finish({}); });
  };
  // Named first: g++ 12 destroys captures twice when the lambda stands inside the co_await expression.
  auto waiting = asio::async_initiate<const asio::use_awaitable_t<>&, void(boost::system::error_code)>(
      initiate, asio::use_awaitable);
  co_await std::move(waiting);
}

Task<void> waitFor(Clock& clock, Nanoseconds duration) {
  return waitUntil(clock, clock.now() + duration);
}

// ---------------------------------------------------------------- real time

struct RealClock::State {
  explicit State(asio::io_context& ctx) : context(ctx) {}
  asio::io_context& context;
  Instant startUtc = std::chrono::time_point_cast<Nanoseconds>(std::chrono::system_clock::now());
  std::chrono::steady_clock::time_point startSteady = std::chrono::steady_clock::now();
  Ticket last = 0;
  std::unordered_map<Ticket, std::unique_ptr<asio::steady_timer>> timers;
};

RealClock::RealClock(asio::io_context& context) : state_(std::make_shared<State>(context)) {}
RealClock::~RealClock() {
  state_->timers.clear();
}

Instant RealClock::now() const {
  return state_->startUtc + (std::chrono::steady_clock::now() - state_->startSteady);
}

Clock::Ticket RealClock::at(Instant when, std::function<void()> callback) {
  const Ticket ticket = ++state_->last;
  auto timer = std::make_unique<asio::steady_timer>(state_->context);
  timer->expires_at(state_->startSteady + (when - state_->startUtc));
  timer->async_wait([weak = std::weak_ptr<State>(state_), ticket,
                     callback = std::move(callback)](boost::system::error_code ec) {
    auto state = weak.lock();
    if (!state) return;
    const bool wanted = state->timers.erase(ticket) == 1;
    if (!ec && wanted) callback();
  });
  state_->timers.emplace(ticket, std::move(timer));
  return ticket;
}

void RealClock::cancel(Ticket ticket) {
  state_->timers.erase(ticket);
}

// ---------------------------------------------------------------- virtual time

VirtualClock::~VirtualClock() {
  // What the callbacks own may cancel other tickets while it is destroyed.
  heap_.clear();
  const auto abandoned = std::exchange(slots_, {});
}

bool VirtualClock::later(const Waiting& a, const Waiting& b) {
  return a.deadline != b.deadline ? a.deadline > b.deadline : a.order > b.order;
}

VirtualClock::Slot* VirtualClock::slotOf(Ticket ticket) {
  const auto index = static_cast<std::uint32_t>(ticket);
  if (index >= slots_.size() || slots_[index].uses != ticket >> 32 || !slots_[index].callback) return nullptr;
  return &slots_[index];
}

std::function<void()> VirtualClock::release(Slot& slot, Ticket ticket) {
  free_.push_back(static_cast<std::uint32_t>(ticket));
  return std::exchange(slot.callback, nullptr);
}

Clock::Ticket VirtualClock::at(Instant when, std::function<void()> callback) {
  if (free_.empty()) {
    free_.push_back(static_cast<std::uint32_t>(slots_.size()));
    slots_.emplace_back();
  }
  const std::uint32_t index = free_.back();
  free_.pop_back();
  Slot& slot = slots_[index];
  slot.callback = std::move(callback);
  const Ticket ticket = (Ticket{++slot.uses} << 32) | index;
  heap_.push_back({std::max(when, now_), asked_++, ticket});
  std::push_heap(heap_.begin(), heap_.end(), later);
  return ticket;
}

void VirtualClock::cancel(Ticket ticket) {
  Slot* slot = slotOf(ticket);
  if (!slot) return;
  // Destroyed last: what it owns may come back here.
  const auto cancelled = release(*slot, ticket);
  dropStale();
}

void VirtualClock::dropStale() {
  while (!heap_.empty() && !slotOf(heap_.front().ticket)) {
    std::pop_heap(heap_.begin(), heap_.end(), later);
    heap_.pop_back();
  }
  constexpr std::size_t kFew = 64;
  const std::size_t alive = slots_.size() - free_.size();
  if (heap_.size() < kFew || heap_.size() < 2 * alive) return;
  std::erase_if(heap_, [this](const Waiting& one) { return !slotOf(one.ticket); });
  std::make_heap(heap_.begin(), heap_.end(), later);
}

bool VirtualClock::advance() {
  if (heap_.empty()) return false;
  std::pop_heap(heap_.begin(), heap_.end(), later);
  const Waiting first = heap_.back();
  heap_.pop_back();
  now_ = first.deadline;
  const auto callback = release(*slotOf(first.ticket), first.ticket);
  dropStale();
  callback();
  return true;
}

Instant VirtualClock::next() const {
  return heap_.empty() ? Instant::max() : heap_.front().deadline;
}

void runVirtual(asio::io_context& context, VirtualClock& clock, const std::function<bool()>& done) {
  for (;;) {
    context.restart();
    while (context.poll() > 0) {
      if (done && done()) return;
    }
    if (done && done()) return;
    if (!clock.advance()) return;
  }
}

}  // namespace shuntwright
