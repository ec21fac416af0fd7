#pragma once

#include "base/error.h"

namespace laygauge {

// What the program tells its caller by its exit code (docs/formats.md, "Exit codes").
enum ExitCode : int {
  kExitDone = 0,
  kExitDoneInPart = 1,   // some photos were refused, the others were measured
  kExitWrongUse = 2,     // of the command line
  kExitBadInput = 3,     // an input is missing, malformed or cannot be measured
  kExitCannotWrite = 4,  // an output could not be written
  kExitBug = 70,         // EX_SOFTWARE of BSD's sysexits.h
};

[[nodiscard]] ExitCode ExitCodeOf(const Problem& problem);

}  // namespace laygauge
