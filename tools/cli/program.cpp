#include <CLI/CLI.hpp>
#include <algorithm>
#include <exception>
#include <ostream>
#include <string>
#include <string_view>

#include "driver/description/toml_reader.h"
#include "tools/cli/command.h"

namespace shuntwright::cli {

std::vector<std::unique_ptr<Command>> allCommands() {
  std::vector<std::unique_ptr<Command>> commands;
  commands.push_back(makeCheck());
  commands.push_back(makeProbe());
  commands.push_back(makeCalibrate());
  commands.push_back(makeRecord());
  commands.push_back(makeExport());
  commands.push_back(makeRelease());
  commands.push_back(makeDemo());
  return commands;
}

int runProgram(int argc, char** argv) {
  Console console = processConsole();
  CLI::App app{"Shuntwright scales strain-gauge bridge channels by relay-switched shunts and records corrected strain."};
  app.set_version_flag("--version", "shuntwright " SHUNTWRIGHT_VERSION);
  app.require_subcommand(1);
  app.footer("It is no safety interlock. A shunt on a load-control channel moves the actuator: isolate the load path "
             "first.\nExit codes: 0 done and passed, 1 a channel failed its limits, 2 bad use or bad file, 3 device or I/O "
             "failure.");
  auto commands = allCommands();
  Command* chosen = nullptr;
  for (auto& command : commands) {
    CLI::App* sub = app.add_subcommand(command->name(), command->summary());
    sub->footer("Example:\n  " + command->example());
    sub->add_flag("--json", console.json, "One JSON document on standard output");
    command->configure(*sub);
    sub->callback([&chosen, one = command.get()] { chosen = one; });
  }
  // The parser itself would only say that a command is needed.
  const std::string first = argc > 1 ? argv[1] : "";
  std::vector<std::string> names;
  for (const auto& command : commands) names.push_back(command->name());
  if (!first.empty() && first.front() != '-' && std::find(names.begin(), names.end(), first) == names.end()) {
    const std::vector<std::string_view> known(names.begin(), names.end());
    return console.fail(Error(ErrorCode::bad_use, "there is no command \"" + first + '"', {},
                              description::suggestion(first, known)));
  }
  try {
    app.parse(argc, argv);
  } catch (const CLI::ParseError& e) {
    const int code = app.exit(e, console.out, console.err);
    return code == 0 ? kPassed : kBadUse;
  }
  try {
    return chosen->run(console);
  } catch (const std::exception& e) {
    console.endProgress();
    console.err << "error: " << e.what() << '\n';
    return kDeviceFailure;
  }
}

}  // namespace shuntwright::cli
