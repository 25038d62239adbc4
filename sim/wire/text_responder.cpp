#include "sim/wire/text_responder.h"

#include <algorithm>

namespace shuntwright::sim {

using description::Exchange;

TextResponder::TextResponder(std::shared_ptr<const description::Profile> profile, DeviceFaults faults,
                             Nanoseconds answerDelay, Instant start, Random random, std::string serialNumber)
    : profile_(std::move(profile)),
      faults_(std::move(faults)),
      answerDelay_(answerDelay),
      start_(start),
      told_(start),
      random_(random),
      serialNumber_(std::move(serialNumber)) {}

void TextResponder::feedBytes(ByteView bytes, Instant now) {
  if (silent(now) || unpluggedUntil(now)) return;
  input_.append(textOf(bytes));
  const std::string& end = profile_->protocol.requestEnd;
  std::size_t cut;
  while ((cut = input_.find(end)) != std::string::npos) {
    const std::string line = input_.substr(0, cut);
    input_.erase(0, cut + end.size());
    if (profile_->protocol.echo) send(line, now);
    if (line.empty()) continue;
    current_.clear();
    const auto body = unsealed(profile_->protocol.checksum, line);
    if (!body) {
      refuse(1, "check sum", now);
    } else if (!handleIdentify(*body, now) && !handle(*body, now)) {
      refuse(2, "not understood", now);
    }
  }
  if (input_.size() > 65536) input_.clear();
}

std::optional<FieldTexts> TextResponder::asks(std::string_view name, const Exchange& exchange, std::string_view line) {
  auto fields = readLine(exchange.ask, line);
  if (fields) {
    current_ = name;
    ++seen_[current_];
    ++seen_[""];
  }
  return fields;
}

bool TextResponder::handleIdentify(std::string_view line, Instant now) {
  if (!profile_->identify || !asks("identify", profile_->identify->exchange, line)) return false;
  const auto& identify = *profile_->identify;
  answer(identify.exchange,
         {{"model", identify.model.empty() ? profile_->name : identify.model},
          {"serial", serialNumber_},
          {"version", "1.0"}},
         now);
  return true;
}

const DeviceFault* TextResponder::faultNow() {
  for (const auto& fault : faults_.requests) {
    if (!fault.request.empty() && fault.request != current_) continue;
    const int nth = seen_[fault.request];
    if (nth >= fault.from && nth - fault.from < fault.count) return &fault;
  }
  return nullptr;
}

void TextResponder::answer(const Exchange& exchange, const FieldTexts& fields, Instant now) {
  if (!exchange.answer) return;
  std::string line = sealed(profile_->protocol.checksum, writeLine(*exchange.answer, fields));
  Instant due = now + answerDelay_;
  if (const DeviceFault* fault = faultNow()) {
    switch (fault->kind) {
      case DeviceFault::Kind::mute: return;
      case DeviceFault::Kind::garbage: line = "\x7f~#$ %&\x01"; break;
      case DeviceFault::Kind::half_answer:
        waiting_.push_back({now + answerDelay_, line.substr(0, line.size() / 2)});
        return;
      case DeviceFault::Kind::error_answer: refuse(7, "fault", now); return;
      case DeviceFault::Kind::late: due += fault->delay; break;
    }
  }
  send(std::move(line), due);
}

void TextResponder::refuse(int code, const std::string& text, Instant now) {
  if (profile_->errors.empty()) return;
  send(sealed(profile_->protocol.checksum,
              writeLine(profile_->errors.front().pattern, {{"code", std::to_string(code)}, {"text", text}})),
       now + answerDelay_);
}

void TextResponder::send(std::string line, Instant when) {
  // Answers keep their order.
  if (!waiting_.empty()) when = std::max(when, waiting_.back().due);
  waiting_.push_back({when, std::move(line) + profile_->protocol.answerEnd});
}

void TextResponder::volunteer(std::string_view line, Instant now) {
  release(now);
  if (silent(now) || unpluggedUntil(now)) return;
  append(output_, bytesOf(line));
  append(output_, bytesOf(profile_->protocol.answerEnd));
}

void TextResponder::release(Instant now) {
  told_ = std::max(told_, now);
  if (unpluggedUntil(now)) forget(now);
  while (!waiting_.empty() && waiting_.front().due <= now) {
    if (!silent(now)) append(output_, bytesOf(waiting_.front().bytes));
    waiting_.pop_front();
  }
}

void TextResponder::forget(Instant now) {
  told_ = std::max(told_, now);
  input_.clear();
  output_.clear();
  waiting_.clear();
}

std::optional<Instant> TextResponder::unpluggedUntil(Instant now) const {
  if (!faults_.unpluggedAfter || now < start_ + *faults_.unpluggedAfter) return std::nullopt;
  if (!faults_.unpluggedFor) return Instant::max();
  const Instant back = start_ + *faults_.unpluggedAfter + *faults_.unpluggedFor;
  return now < back ? std::optional(back) : std::nullopt;
}

Instant TextResponder::nextUnplugging() const {
  if (!faults_.unpluggedAfter || start_ + *faults_.unpluggedAfter <= told_) return Instant::max();
  return start_ + *faults_.unpluggedAfter;
}

Bytes TextResponder::takeBytes() { return std::exchange(output_, {}); }

Instant TextResponder::nextAnswer() const { return waiting_.empty() ? Instant::max() : waiting_.front().due; }

}  // namespace shuntwright::sim
