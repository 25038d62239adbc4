#pragma once

#include <cstdint>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <string_view>

#include "driver/core/bytes.h"
#include "driver/core/error.h"
#include "driver/description/profile.h"
#include "driver/protocol/line_splitter.h"
#include "driver/protocol/template_text.h"
#include "driver/protocol/values.h"

namespace shuntwright::protocol {

/// A request, ready to be sent, and what belongs to it.
struct Request {
  const description::Exchange* exchange = nullptr;
  std::string text;           ///< as the profile writes it, filled in: "CLOSE 3"
  std::string line;           ///< with the check sum, without the terminator
  Bytes bytes;                ///< what goes over the wire
  std::string echo;           ///< the line in which its echo ends, or which runs into the answer
  std::vector<Value> values;  ///< numbers that an answer must repeat where it has fields of the same name

  bool wantsAnswer() const { return exchange->answer.has_value(); }
};

/// What a line from the device is.
struct Incoming {
  enum class Kind {
    echo,            ///< the request, sent back
    answer,          ///< the answer that the request wants; `fields`
    device_error,    ///< an answer that means "no"; `code`, `text`
    stream,          ///< a line of samples; `counter`; values and flags are filled in
    damaged_stream,  ///< begins like a line of samples, but cannot be read; `problem`
    damaged,         ///< wrong or no check sum; `problem`
    unknown,         ///< nothing that the profile describes; `problem`
  };
  Kind kind = Kind::unknown;
  std::string_view body;  ///< the line without its check sum
  std::uint64_t counter = 0;
  std::string code;
  std::string text;
  std::string problem;
};

/// The text-line protocol of one profile: requests to bytes, lines to meanings. No I/O.
///
/// One thread, since buffers are used again. A line of samples is decoded without allocating.
class TextDialect {
 public:
  explicit TextDialect(std::shared_ptr<const description::Profile> profile);

  const description::Profile& profile() const { return *profile_; }
  LineSplitter splitter() const;
  std::size_t inputs() const { return inputs_; }

  /// Fills in a request of the profile. Errors: bad_use when a value is missing or does not suit.
  Result<Request> request(const description::Exchange& exchange, std::span<const Value> values = {}) const;

  /// Says what a line is. A line of samples comes first, so that samples left over from an earlier run are
  /// never taken for an answer; then error answers, and the answer to `pending`.
  /// @param pending  the request that waits for an answer; may be null
  /// @param ratio, flags  out, `inputs()` values each, filled in for Kind::stream
  Incoming classify(std::string_view line, const Request* pending, std::span<float> ratio,
                    std::span<std::uint8_t> flags);

  /// Fields of the last line that was an answer. Views point into that line.
  const Fields& fields() const { return fields_; }

  /// The readings in the {values} field of the last answer. Errors: bad_answer, naming what was expected and
  /// what came.
  Result<void> values(std::span<float> ratio, std::span<std::uint8_t> flags) const;

  /// Takes the echo of `request` off a line. An echo ends as the request does; where an answer ends
  /// otherwise, the echo shares its line with the answer or leaves the rest of its end before it.
  /// @param expected  in: the echo has not come yet; out: false when it was found
  /// @returns what is left, empty when the line was the echo alone.
  std::string_view withoutEcho(std::string_view line, const Request& request, bool& expected) const;

 private:
  bool readStream(std::string_view body, Incoming& out, std::span<float> ratio,
                  std::span<std::uint8_t> flags);
  bool beginsLikeStream(std::string_view line) const;
  bool readsCounter(const Fields::Field& field, std::uint64_t& value) const;
  std::string streamProblem(std::string_view body);
  bool repeatsValues(const Request& request, std::string& problem) const;

  std::shared_ptr<const description::Profile> profile_;
  std::size_t inputs_ = 0;
  std::optional<ValueFormat> format_;
  bool echoEndsLine_ = true;  ///< the end of a request ends an answer, too
  std::string echoTail_;      ///< what of it then stands before the answer
  Fields fields_;
};

}  // namespace shuntwright::protocol
