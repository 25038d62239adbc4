#include "tools/cli/console.h"

#include <unistd.h>

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <cstdlib>
#include <iostream>

namespace shuntwright::cli {

int exitCodeFor(ErrorCode code) {
  switch (code) {
    case ErrorCode::bad_use:
    case ErrorCode::bad_file:
    case ErrorCode::refused:
    case ErrorCode::not_found: return kBadUse;
    case ErrorCode::io:
    case ErrorCode::timeout:
    case ErrorCode::bad_answer:
    case ErrorCode::device_error:
    case ErrorCode::cancelled: return kDeviceFailure;
  }
  return kDeviceFailure;
}

int Console::fail(const Error& error) const {
  endProgress();
  err << bad("error:") << ' ' << error.text() << '\n';
  return exitCodeFor(error.code);
}

namespace {
std::string wrapped(bool colour, const char* code, std::string_view text) {
  if (!colour) return std::string(text);
  return std::string("\x1b[") + code + "m" + std::string(text) + "\x1b[0m";
}
}  // namespace

std::string Console::bold(std::string_view text) const { return wrapped(colour, "1", text); }
std::string Console::good(std::string_view text) const { return wrapped(colour, "32", text); }
std::string Console::bad(std::string_view text) const { return wrapped(colour, "1;31", text); }
std::string Console::dim(std::string_view text) const { return wrapped(colour, "2", text); }

void Console::progress(double part, std::string_view text) const {
  if (!errIsTerminal) return;
  constexpr int kWidth = 30;
  const int done = static_cast<int>(std::clamp(part, 0.0, 1.0) * kWidth);
  err << "\r[" << std::string(static_cast<std::size_t>(done), '#') << std::string(static_cast<std::size_t>(kWidth - done), '.')
      << "] " << text << "\x1b[K" << std::flush;
}

void Console::endProgress() const {
  if (errIsTerminal) err << "\r\x1b[K" << std::flush;
}

Console processConsole() {
  Console console{std::cout, std::cerr};
  console.outIsTerminal = ::isatty(STDOUT_FILENO) == 1;
  console.errIsTerminal = ::isatty(STDERR_FILENO) == 1;
  console.interactive = ::isatty(STDIN_FILENO) == 1 && console.errIsTerminal;
  const char* noColour = std::getenv("NO_COLOR");
  console.colour = console.outIsTerminal && !(noColour && *noColour);
  return console;
}

std::size_t cells(std::string_view text) {
  std::size_t count = 0;
  bool escape = false;
  for (const char c : text) {
    if (c == '\x1b') escape = true;
    if (escape) {
      if (c == 'm') escape = false;
      continue;
    }
    if ((static_cast<unsigned char>(c) & 0xC0) != 0x80) ++count;
  }
  return count;
}

void Table::print(const Console& console) const {
  std::vector<std::size_t> width(columns_.size());
  for (std::size_t k = 0; k < columns_.size(); ++k) {
    width[k] = cells(columns_[k].title);
    for (const auto& row : rows_) {
      if (k < row.size()) width[k] = std::max(width[k], cells(row[k]));
    }
  }
  const auto line = [&](const std::vector<std::string>& row, bool title) {
    std::string text;
    for (std::size_t k = 0; k < columns_.size(); ++k) {
      const std::string cell = k < row.size() ? row[k] : "";
      const std::string room(width[k] - cells(cell), ' ');
      if (k > 0) text += "  ";
      text += columns_[k].align == Align::left ? cell + (k + 1 < columns_.size() ? room : "") : room + cell;
    }
    console.out << (title ? console.bold(text) : text) << '\n';
  };
  std::vector<std::string> titles;
  for (const auto& column : columns_) titles.push_back(column.title);
  line(titles, true);
  for (const auto& row : rows_) line(row, false);
}

std::string fixed(double value, int decimals) {
  if (!std::isfinite(value)) return "-";
  char text[64];
  std::snprintf(text, sizeof text, "%.*f", decimals, value);
  // No "-0.00".
  if (std::string_view(text).find_first_not_of("-0.") == std::string_view::npos && text[0] == '-') return text + 1;
  return text;
}

}  // namespace shuntwright::cli
