#pragma once

#include <deque>
#include <map>
#include <memory>
#include <string>
#include <string_view>

#include "driver/core/bytes.h"
#include "driver/core/clock.h"
#include "driver/core/random.h"
#include "driver/description/profile.h"
#include "sim/fault/scenario.h"
#include "sim/wire/text_line.h"

namespace shuntwright::sim {

/// What the text-line devices have in common: cutting requests out of the bytes, check sums, echo, delayed
/// answers in order, error answers, and the faults of the wire. A device says what a request does.
class TextResponder {
 public:
  TextResponder(std::shared_ptr<const description::Profile> profile, DeviceFaults faults, Nanoseconds answerDelay,
                Instant start, Random random, std::string serialNumber);
  virtual ~TextResponder() = default;

  void feedBytes(ByteView bytes, Instant now);
  void release(Instant now);          ///< moves what is due into the output
  Bytes takeBytes();
  Instant nextAnswer() const;         ///< Instant::max(): none waits

 protected:
  /// Reads `line` against the exchange of a name; when it fits, notes the name and gives its fields.
  std::optional<FieldTexts> asks(std::string_view name, const description::Exchange& exchange, std::string_view line);
  bool handleIdentify(std::string_view line, Instant now);

  void answer(const description::Exchange& exchange, const FieldTexts& fields, Instant now);
  void refuse(int code, const std::string& text, Instant now);  ///< an error answer
  /// A line that nobody asked for: samples of a stream. Not delayed.
  void volunteer(std::string_view line, Instant now);
  bool silent(Instant now) const { return faults_.silentAfter && now - start_ >= *faults_.silentAfter; }
  std::optional<Instant> unpluggedUntil(Instant now) const;
  Instant nextUnplugging() const;  ///< Instant::max(): none to come
  void forget(Instant now);        ///< half a request, answers not yet sent

  const description::Profile& profile() const { return *profile_; }
  Random& random() { return random_; }
  const DeviceFaults& faults() const { return faults_; }

  /// Does what a request says. False: not understood.
  virtual bool handle(std::string_view line, Instant now) = 0;

 private:
  void send(std::string line, Instant when);
  const DeviceFault* faultNow();

  std::shared_ptr<const description::Profile> profile_;
  DeviceFaults faults_;
  Nanoseconds answerDelay_;
  Instant start_;
  Instant told_;  ///< the latest time it was told of
  Random random_;
  std::string serialNumber_;
  std::string input_;
  std::string current_;  ///< name of the request being answered
  std::map<std::string, int, std::less<>> seen_;
  struct Waiting {
    Instant due;
    std::string bytes;
  };
  std::deque<Waiting> waiting_;
  Bytes output_;
};

}  // namespace shuntwright::sim
