#include "sim/amplifier/text_device.h"

#include <algorithm>
#include <charconv>
#include <cmath>

namespace shuntwright::sim {

using namespace units;
using description::Segment;
using description::ValueUnit;

namespace {

int numberIn(const FieldTexts& fields, std::string_view name, int otherwise) {
  const auto found = fields.find(name);
  if (found == fields.end()) return otherwise;
  int value = otherwise;
  std::from_chars(found->second.data(), found->second.data() + found->second.size(), value);
  return value;
}

double decimalIn(const FieldTexts& fields, std::string_view name) {
  const auto found = fields.find(name);
  double value = 0;
  if (found != fields.end()) std::from_chars(found->second.data(), found->second.data() + found->second.size(), value);
  return value;
}

/// value x 10^-decimals in plain decimals, put together from its end; far cheaper than formatting a double.
void addFixed(std::string& text, long long value, int decimals) {
  char digits[48];
  char* const end = digits + sizeof digits;
  char* at = end;
  auto left = static_cast<unsigned long long>(value < 0 ? -value : value);
  for (int k = 0; k < decimals; ++k, left /= 10) *--at = static_cast<char>('0' + left % 10);
  if (decimals > 0) *--at = '.';
  do {
    *--at = static_cast<char>('0' + left % 10);
    left /= 10;
  } while (left > 0);
  if (value < 0) *--at = '-';
  text.append(at, static_cast<std::size_t>(end - at));
}

std::string listSeparator(const description::Inputs& inputs) {
  const description::TextTemplate* forms[] = {inputs.streamLine ? &*inputs.streamLine : nullptr,
                                              inputs.read && inputs.read->answer ? &*inputs.read->answer : nullptr};
  for (const auto* form : forms) {
    if (!form) continue;
    for (const auto& segment : form->segments) {
      if (segment.kind == Segment::Kind::list) return segment.separator;
    }
  }
  return ",";
}

}  // namespace

TextDevice::TextDevice(std::shared_ptr<const description::Profile> profile, std::vector<BridgeInput*> inputs,
                       std::unique_ptr<RelayBoard> relays, DeviceFaults faults, const Imperfections& imperfections,
                       Instant start, Random random, std::string serialNumber)
    : TextResponder(std::move(profile), std::move(faults), imperfections.answerDelay, start, random,
                    std::move(serialNumber)),
      inputs_(std::move(inputs)),
      relays_(std::move(relays)),
      sendEvery_(imperfections.sendEvery) {
  const auto& described = TextResponder::profile().inputs;
  if (!described) return;
  perUnit_ = described->gives == ValueUnit::volt_per_volt         ? 1
             : described->gives == ValueUnit::millivolt_per_volt ? 1e-3
                                                                  : 1e-6;
  digit_ = described->resolution.in(volt_per_volt) / perUnit_;
  decimals_ = std::clamp(static_cast<int>(std::ceil(-std::log10(digit_) - 1e-9)), 0, 15);
  lastDigits_ = std::llround(digit_ * std::pow(10.0, decimals_));
  fullScale_ = described->fullScale.in(volt_per_volt) / perUnit_;
  separator_ = listSeparator(*described);
  setRate(described->rates.empty() ? rate_Hz_ : described->rates.front().in(hertz));
}

void TextDevice::setRate(double rate_Hz) {
  rate_Hz_ = rate_Hz;
  packet_ = std::max<std::uint64_t>(1, static_cast<std::uint64_t>(seconds(sendEvery_) * rate_Hz));
}

void TextDevice::connected(Instant now) {
  if (relays_) relays_->advance(now);
  // A stream that nobody heard ran on: its numbers tell what was missed.
  if (streaming_ && frameDue() < now) {
    const auto unheard = static_cast<std::uint64_t>(seconds(now - frameDue()) * rate_Hz_);
    frame_ += unheard;
    counter_ += unheard;
  }
  forget(now);
}

void TextDevice::feed(ByteView bytes, Instant now) {
  advance(now);
  feedBytes(bytes, now);
  release(now);
}

void TextDevice::advance(Instant now) {
  if (relays_) relays_->advance(now);
  while (streaming_ && frameDue() <= now) streamFrame(frameDue());
  release(now);
}

void TextDevice::sampleBefore(Instant when) {
  while (streaming_ && frameDue() < when) streamFrame(frameDue());
}

Instant TextDevice::frameDue(std::uint64_t ahead) const {
  return streamStart_ + fromSeconds(static_cast<double>(frame_ + ahead) / rate_Hz_);
}

Instant TextDevice::nextEvent() const {
  Instant earliest = std::min(nextAnswer(), nextUnplugging());
  if (relays_) earliest = std::min(earliest, relays_->next());
  // A packet goes when its last frame is there.
  if (streaming_) earliest = std::min(earliest, frameDue(packet_ - 1 - frame_ % packet_));
  return earliest;
}

bool TextDevice::handle(std::string_view line, Instant now) {
  return (profile().inputs && handleInputs(line, now)) || (relays_ && handleRelays(line, now));
}

bool TextDevice::handleInputs(std::string_view line, Instant now) {
  const auto& d = *profile().inputs;
  if (d.read) {
    if (auto fields = asks("read", *d.read, line)) {
      const int first = numberIn(*fields, "first", d.first), last = numberIn(*fields, "last", d.first + d.count - 1);
      if (first < d.first || last < first || last >= d.first + d.count) {
        refuse(3, "no such input", now);
        return true;
      }
      values_.clear();
      for (int k = first; k <= last; ++k) {
        if (k > first) values_ += separator_;
        addValue(values_, static_cast<std::size_t>(k - d.first), now);
      }
      (*fields)["values"] = values_;
      answer(*d.read, *fields, now);
      return true;
    }
  }
  if (d.streamStart) {
    if (auto fields = asks("stream start", *d.streamStart, line)) {
      answer(*d.streamStart, *fields, now);
      if (!streaming_) frame_ = 0;
      streaming_ = true;
      streamStart_ = now + std::chrono::milliseconds(5);
      frame_ = 0;
      return true;
    }
  }
  if (d.streamStop) {
    if (auto fields = asks("stream stop", *d.streamStop, line)) {
      streaming_ = false;
      answer(*d.streamStop, *fields, now);
      return true;
    }
  }
  if (d.setRate) {
    if (auto fields = asks("set rate", *d.setRate, line)) {
      const double wanted = decimalIn(*fields, "rate");
      const bool offered = std::any_of(d.rates.begin(), d.rates.end(),
                                       [&](Frequency f) { return std::abs(f.in(hertz) - wanted) < 1e-9; });
      if (!offered || streaming_) {
        refuse(4, streaming_ ? "streaming" : "no such rate", now);
        return true;
      }
      setRate(wanted);
      answer(*d.setRate, *fields, now);
      return true;
    }
  }
  if (d.setExcitation) {
    if (auto fields = asks("set excitation", *d.setExcitation, line)) {
      const double wanted = decimalIn(*fields, "excitation");
      const bool offered = std::any_of(d.excitations.begin(), d.excitations.end(),
                                       [&](Voltage v) { return std::abs(v.in(volt) - wanted) < 1e-9; });
      if (!offered) {
        refuse(4, "no such excitation", now);
        return true;
      }
      answer(*d.setExcitation, *fields, now);
      return true;
    }
  }
  return false;
}

bool TextDevice::handleRelays(std::string_view line, Instant now) {
  const auto& d = *profile().relays;
  if (d.openAll && asks("open all", *d.openAll, line)) {
    for (int k = 0; k < d.count; ++k) relays_->command(d.first + k, false, now);
    answer(*d.openAll, {}, now);
    return true;
  }
  for (const bool close : {true, false}) {
    const auto& exchange = close ? d.close : d.open;
    if (auto fields = asks(close ? "close" : "open", exchange, line)) {
      const int relay = numberIn(*fields, "relay", d.first - 1);
      if (!relays_->has(relay)) {
        refuse(3, "no such relay", now);
        return true;
      }
      relays_->command(relay, close, now);
      answer(exchange, *fields, now);
      return true;
    }
  }
  if (d.state) {
    if (auto fields = asks("state", *d.state, line)) {
      const int relay = numberIn(*fields, "relay", d.first - 1);
      if (!relays_->has(relay)) {
        refuse(3, "no such relay", now);
        return true;
      }
      (*fields)["state"] = relays_->closed(relay) ? d.closedWord : d.openWord;
      answer(*d.state, *fields, now);
      return true;
    }
  }
  return false;
}

void TextDevice::addValue(std::string& text, std::size_t input, Instant now) {
  const auto& d = *profile().inputs;
  BridgeInput* one = inputs_[input];
  if (!one) {
    text += d.missing.empty() ? "0" : d.missing.front();
    return;
  }
  const double value = one->sample(now) / perUnit_;
  if (one->saturated() || !(std::abs(value) <= fullScale_)) {
    const bool low = value < 0 && d.saturated.size() > 1;
    if (d.saturated.empty()) {
      const double end = value < 0 ? -fullScale_ : fullScale_;
      char digits[40];
      text.append(digits, std::to_chars(digits, digits + sizeof digits, end, std::chars_format::fixed, decimals_).ptr);
    } else {
      text += d.saturated[low ? 1 : 0];
    }
    return;
  }
  const double digits = value / digit_;
  addFixed(text, static_cast<long long>(digits + std::copysign(0.5, digits)) * lastDigits_, decimals_);
}

void TextDevice::streamFrame(Instant when) {
  const auto& d = *profile().inputs;
  ++frame_;
  const std::uint64_t counter = counter_++;
  values_.clear();
  for (std::size_t k = 0; k < inputs_.size(); ++k) {
    if (k > 0) values_ += separator_;
    addValue(values_, k, when);
  }
  if (faults().lostFrames > 0 && random().uniform() < faults().lostFrames) return;
  // The general writer would build a map a frame; a stream line has two fields.
  line_.clear();
  for (const Segment& segment : d.streamLine->segments) {
    if (segment.kind == Segment::Kind::literal) {
      line_ += segment.text;
    } else if (segment.kind == Segment::Kind::list) {
      line_ += values_;
    } else {
      const std::uint64_t shown = d.counterBits > 0 && d.counterBits < 64 ? counter & ((std::uint64_t{1} << d.counterBits) - 1) : counter;
      const bool hexadecimal = segment.kind == Segment::Kind::hex_upper || segment.kind == Segment::Kind::hex_lower;
      char digits[24];
      const auto end = std::to_chars(digits, digits + sizeof digits, shown, hexadecimal ? 16 : 10).ptr;
      if (segment.kind == Segment::Kind::hex_upper) {
        std::transform(digits, end, digits, [](char c) { return c >= 'a' && c <= 'f' ? static_cast<char>(c - 32) : c; });
      }
      const int size = static_cast<int>(end - digits);
      if (segment.kind != Segment::Kind::text && size < segment.width) {
        line_.append(static_cast<std::size_t>(segment.width - size), '0');
      }
      line_.append(digits, end);
    }
  }
  if (profile().protocol.checksum.kind != description::Checksum::Kind::none) {
    volunteer(sealed(profile().protocol.checksum, line_), when);
  } else {
    volunteer(line_, when);
  }
}

}  // namespace shuntwright::sim
