#include "driver/plugin/block_queue.h"

#include <utility>

namespace shuntwright::plugin {

namespace {
constexpr std::size_t kMany = 64;
}

void BlockQueue::clear() {
  const std::lock_guard lock(mutex_);
  blocks_.clear();
  frames_.clear();
  dropped_.clear();
  error_.reset();
}

void BlockQueue::push(std::unique_ptr<Block> block, std::size_t most) {
  const std::string device = block->device;
  const std::lock_guard lock(mutex_);
  const Gone before = std::exchange(dropped_[device], {});
  block->lost += before.lost;
  block->damaged += before.damaged;
  frames_[device] += block->samples.frames();
  blocks_.push_back(std::move(block));
  dropOldest(device, most);
  arrived_.notify_all();
}

void BlockQueue::dropOldest(const std::string& device, std::size_t most) {
  auto it = blocks_.begin();
  while (frames_[device] > most && it != blocks_.end()) {
    if ((*it)->device != device) {
      ++it;
      continue;
    }
    const std::size_t frames = (*it)->samples.frames();
    frames_[device] -= frames;
    Gone gone{frames + (*it)->lost, (*it)->damaged};
    it = blocks_.erase(it);
    for (auto next = it; next != blocks_.end(); ++next) {
      if ((*next)->device != device) continue;
      (*next)->lost += gone.lost;
      (*next)->damaged += gone.damaged;
      gone = {};
      break;
    }
    dropped_[device].lost += gone.lost;
    dropped_[device].damaged += gone.damaged;
  }
}

void BlockQueue::end(Error error) {
  const std::lock_guard lock(mutex_);
  error_ = std::move(error);
  // To the host a time-out means "try again"; this one is final.
  if (error_->code == ErrorCode::timeout) error_->code = ErrorCode::io;
  arrived_.notify_all();
}

Result<std::unique_ptr<Block>> BlockQueue::take(std::chrono::milliseconds timeout) {
  std::unique_lock lock(mutex_);
  arrived_.wait_for(lock, timeout, [this] { return !blocks_.empty() || error_.has_value(); });
  if (blocks_.empty()) {
    if (error_) return std::unexpected(*error_);
    return fail(ErrorCode::timeout, "no samples came in time");
  }
  auto block = std::move(blocks_.front());
  blocks_.pop_front();
  frames_[block->device] -= block->samples.frames();
  taken_.notify_all();
  return block;
}

bool BlockQueue::waitForRoom() {
  std::unique_lock lock(mutex_);
  if (blocks_.size() < kMany) return false;
  taken_.wait_for(lock, std::chrono::milliseconds(20));
  return true;
}

void BlockQueue::wake() { taken_.notify_all(); }

}  // namespace shuntwright::plugin
