#pragma once

#include <expected>
#include <memory>
#include <string>
#include <utility>

namespace shuntwright {

/// A place in a text file. Lines and columns count from 1; 0 means unknown. Columns count code points.
struct Place {
  std::string file;
  int line = 0;
  int column = 0;

  /// "file:line:column", as far as it is known.
  std::string text() const;
  friend bool operator==(const Place&, const Place&) = default;
};

enum class ErrorCode {
  bad_use,       ///< the caller or the command line asked for something that makes no sense
  bad_file,      ///< a profile, rack or other file says something wrong
  io,            ///< the operating system refused, or a port or file failed
  timeout,       ///< nothing (or not enough) came in time
  bad_answer,    ///< a device answered something the profile does not describe
  device_error,  ///< a device answered with an error of its own
  refused,       ///< the tool declines: not confirmed, locked, unsafe
  not_found,     ///< a named thing is not there
  cancelled,     ///< stopped on purpose
};

/// Word for the code, as JSON and logs print it: "bad_use", ...
const char* name(ErrorCode code);

/// An error is a value with a place, a cause and a remedy.
struct Error {
  ErrorCode code = ErrorCode::bad_use;
  std::string message;  ///< what is wrong, one sentence without a full stop
  std::string where;    ///< file:line:column, or "device amp1 (tcp:127.0.0.1:5101), request \"ID?\""
  std::string remedy;   ///< how to mend it; may be empty
  std::shared_ptr<const Error> cause;

  Error() = default;
  Error(ErrorCode errorCode, std::string text, std::string place = {}, std::string mend = {})
      : code(errorCode), message(std::move(text)), where(std::move(place)), remedy(std::move(mend)) {}

  /// The same error seen from one level up.
  Error wrap(std::string outerMessage, std::string outerWhere = {}) &&;

  /// The one printed form: "where: message\n  because: cause\n  remedy: ...".
  std::string text() const;
};

template <class T = void>
using Result = std::expected<T, Error>;

/// `return fail(ErrorCode::io, "...")` from any function that returns a Result.
inline std::unexpected<Error> fail(ErrorCode code, std::string message, std::string where = {},
                                   std::string remedy = {}) {
  return std::unexpected<Error>(Error(code, std::move(message), std::move(where), std::move(remedy)));
}

}  // namespace shuntwright
