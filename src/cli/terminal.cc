#include "cli/terminal.h"

#include <unistd.h>

#include <cstdlib>
#include <iostream>
#include <string>

namespace laygauge {
namespace {

bool IsColourWanted(int descriptor) {
  const char* no_color = std::getenv("NO_COLOR");
  const char* term = std::getenv("TERM");
  const bool refused = no_color && *no_color != '\0';
  return !refused && term && std::string_view(term) != "dumb" && ::isatty(descriptor) == 1;
}

}  // namespace

Terminal StandardTerminal() {
  return {std::cout, std::cerr, IsColourWanted(STDOUT_FILENO), IsColourWanted(STDERR_FILENO)};
}

void Complain(const Terminal& terminal, std::string_view message) {
  std::string line(message);
  for (char& letter : line) {
    if (letter == '\n' || letter == '\r') letter = ' ';
  }
  terminal.err << (terminal.color_err ? "\033[1;31mlaygauge:\033[0m " : "laygauge: ") << line
               << std::endl;
}

ExitCode Report(const Terminal& terminal, const Problem& problem) {
  Complain(terminal, problem.message);
  return ExitCodeOf(problem);
}

}  // namespace laygauge
