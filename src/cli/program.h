#pragma once

#include <CLI/CLI.hpp>
#include <functional>
#include <string>
#include <vector>

#include "cli/terminal.h"

namespace laygauge {

// A command: its part of the command line, and what to do when it was given.
struct Command {
  CLI::App* app = nullptr;
  std::function<int(const Terminal&)> run;  // returns an ExitCode
};

// How a command joins the program: it adds its options to `program`, bound to an options struct
// that `run` shares. Listed in program.cc, in the order of the help.
using AddCommand = Command (*)(CLI::App& program);

// Parses the arguments (without the program's own name) and runs the command that they name.
// Every failure ends as one line on terminal.err and an exit code; nothing is thrown.
[[nodiscard]] int RunProgram(const std::vector<std::string>& arguments, const Terminal& terminal);

}  // namespace laygauge
