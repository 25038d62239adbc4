#pragma once

#include <memory>
#include <string>
#include <vector>

#include "tools/cli/console.h"

namespace CLI {
class App;
}

namespace shuntwright::cli {

/// One command of the program, in a file of its own.
class Command {
 public:
  virtual ~Command() = default;
  virtual std::string name() const = 0;
  virtual std::string summary() const = 0;
  virtual std::string example() const = 0;  ///< one real call
  virtual void configure(CLI::App& app) = 0;
  virtual int run(const Console& console) = 0;
};

/// All commands, in the order in which a person needs them.
std::vector<std::unique_ptr<Command>> allCommands();

std::unique_ptr<Command> makeCheck();
std::unique_ptr<Command> makeProbe();
std::unique_ptr<Command> makeCalibrate();
std::unique_ptr<Command> makeRecord();
std::unique_ptr<Command> makeExport();
std::unique_ptr<Command> makeRelease();
std::unique_ptr<Command> makeDemo();

/// The whole program: parses, runs, gives the exit code.
int runProgram(int argc, char** argv);

}  // namespace shuntwright::cli
