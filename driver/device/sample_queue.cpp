#include "driver/device/sample_queue.h"

#include <algorithm>
#include <utility>

namespace shuntwright::device {

namespace {

constexpr std::size_t kChunks = 10;

void appendBlock(SampleBlock& to, const SampleBlock& from) {
  to.time.insert(to.time.end(), from.time.begin(), from.time.end());
  to.ratio.insert(to.ratio.end(), from.ratio.begin(), from.ratio.end());
  to.flags.insert(to.flags.end(), from.flags.begin(), from.flags.end());
}

}  // namespace

SampleQueue::SampleQueue(std::size_t inputs, std::size_t limit)
    : inputs_(inputs), limit_(std::max<std::size_t>(limit, 1)), chunk_((limit_ + kChunks - 1) / kChunks) {}

void SampleQueue::startBlock() {
  SampleBlock& block = blocks_.emplace_back();
  block.inputs = inputs_;
  block.lostBefore = std::exchange(lost_, 0);
  block.damagedBefore = std::exchange(damaged_, 0);
}

void SampleQueue::dropOldest() {
  SampleBlock old = std::move(blocks_.front());
  blocks_.pop_front();
  frames_ -= old.frames();
  const std::uint64_t lost = old.lostBefore + old.frames();
  if (blocks_.empty()) {
    lost_ += lost;
    damaged_ += old.damagedBefore;
  } else {
    blocks_.front().lostBefore += lost;
    blocks_.front().damagedBefore += old.damagedBefore;
  }
}

void SampleQueue::push(Instant when, std::span<const float> ratio, std::span<const std::uint8_t> flags) {
  while (frames_ >= limit_) dropOldest();
  if (blocks_.empty() || lost_ > 0 || damaged_ > 0 || blocks_.back().frames() >= chunk_) startBlock();
  if (when <= last_) when = last_ + Nanoseconds(1);
  last_ = when;
  SampleBlock& block = blocks_.back();
  block.time.push_back(when);
  block.ratio.insert(block.ratio.end(), ratio.begin(), ratio.end());
  block.flags.insert(block.flags.end(), flags.begin(), flags.end());
  ++frames_;
}

void SampleQueue::spread(std::size_t count, Instant arrival, Nanoseconds period) {
  std::vector<Instant*> newestFirst;
  newestFirst.reserve(count);
  Instant previous = Instant::min();
  for (auto block = blocks_.rbegin(); block != blocks_.rend() && previous == Instant::min(); ++block) {
    for (auto time = block->time.rbegin(); time != block->time.rend(); ++time) {
      if (newestFirst.size() == count) {
        previous = *time;
        break;
      }
      newestFirst.push_back(&*time);
    }
  }
  for (std::size_t age = newestFirst.size(); age-- > 0;) {
    Instant when = arrival - static_cast<std::int64_t>(age) * period;
    if (previous != Instant::min() && when <= previous) when = previous + Nanoseconds(1);
    *newestFirst[age] = last_ = previous = when;
  }
}

SampleBlock SampleQueue::take() {
  if (blocks_.empty()) {
    SampleBlock none;
    none.inputs = inputs_;
    none.lostBefore = std::exchange(lost_, 0);
    none.damagedBefore = std::exchange(damaged_, 0);
    return none;
  }
  SampleBlock out = std::move(blocks_.front());
  blocks_.pop_front();
  while (!blocks_.empty() && blocks_.front().lostBefore == 0 && blocks_.front().damagedBefore == 0) {
    appendBlock(out, blocks_.front());
    blocks_.pop_front();
  }
  frames_ -= out.frames();
  return out;
}

void SampleQueue::clear() {
  blocks_.clear();
  frames_ = 0;
  lost_ = damaged_ = 0;
  last_ = Instant::min();
}

}  // namespace shuntwright::device
