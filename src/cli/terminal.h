#pragma once

#include <ostream>
#include <string_view>

#include "base/error.h"
#include "cli/exit_code.h"

namespace laygauge {

// Where a command writes: results to `out`, everything else to `err`.
struct Terminal {
  std::ostream& out;
  std::ostream& err;
  bool color_out = false;
  bool color_err = false;
};

// Standard output and error; in colour where they are a terminal and NO_COLOR is not set
// (no-color.org) and TERM is not "dumb".
[[nodiscard]] Terminal StandardTerminal();

// One line on `err`, "laygauge: MESSAGE".
void Complain(const Terminal& terminal, std::string_view message);

// Complains, and returns the exit code that belongs to the problem.
[[nodiscard]] ExitCode Report(const Terminal& terminal, const Problem& problem);

}  // namespace laygauge
