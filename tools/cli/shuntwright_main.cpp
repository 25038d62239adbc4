#include "tools/cli/command.h"

int main(int argc, char** argv) { return shuntwright::cli::runProgram(argc, argv); }
