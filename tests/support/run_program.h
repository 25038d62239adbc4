#pragma once

#include <sys/wait.h>

#include <cstdio>
#include <string>

namespace shuntwright::test {

struct Ran {
  int code = -1;    ///< exit code; -1 when it was killed
  std::string out;  ///< standard output
};

/// Runs a shell command with no standard input.
inline Ran runShell(const std::string& command) {
  Ran ran;
  FILE* pipe = ::popen((command + " < /dev/null").c_str(), "r");
  if (!pipe) return ran;
  char buffer[4096];
  while (const std::size_t got = std::fread(buffer, 1, sizeof buffer, pipe)) ran.out.append(buffer, got);
  const int status = ::pclose(pipe);
  ran.code = WIFEXITED(status) ? WEXITSTATUS(status) : -1;
  return ran;
}

/// Runs `shuntwright` as built beside the tests.
inline Ran runShuntwright(const std::string& arguments) {
  return runShell(std::string(SHUNTWRIGHT_BIN_DIR) + "/shuntwright " + arguments);
}

}  // namespace shuntwright::test
