#include "driver/core/error.h"

namespace shuntwright {

std::string Place::text() const {
  std::string out = file;
  if (line > 0) {
    out += ':' + std::to_string(line);
    if (column > 0) out += ':' + std::to_string(column);
  }
  return out;
}

const char* name(ErrorCode code) {
  switch (code) {
    case ErrorCode::bad_use: return "bad_use";
    case ErrorCode::bad_file: return "bad_file";
    case ErrorCode::io: return "io";
    case ErrorCode::timeout: return "timeout";
    case ErrorCode::bad_answer: return "bad_answer";
    case ErrorCode::device_error: return "device_error";
    case ErrorCode::refused: return "refused";
    case ErrorCode::not_found: return "not_found";
    case ErrorCode::cancelled: return "cancelled";
  }
  return "unknown";
}

Error Error::wrap(std::string outerMessage, std::string outerWhere) && {
  Error outer(code, std::move(outerMessage), std::move(outerWhere));
  outer.cause = std::make_shared<const Error>(std::move(*this));
  return outer;
}

std::string Error::text() const {
  std::string out = where.empty() ? message : where + ": " + message;
  for (auto inner = cause; inner; inner = inner->cause) {
    out += "\n  because: ";
    if (!inner->where.empty()) out += inner->where + ": ";
    out += inner->message;
  }
  const Error* deepest = this;
  while (deepest->remedy.empty() && deepest->cause) deepest = deepest->cause.get();
  if (!deepest->remedy.empty()) out += "\n  remedy: " + deepest->remedy;
  return out;
}

}  // namespace shuntwright
