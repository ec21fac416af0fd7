#include "cli/exit_code.h"

namespace laygauge {

ExitCode ExitCodeOf(const Problem& problem) {
  switch (problem.kind) {
    case ProblemKind::kBadInput:
    case ProblemKind::kUnmeasurable:
      return kExitBadInput;
    case ProblemKind::kCannotWrite:
      return kExitCannotWrite;
  }
  return kExitBug;
}

}  // namespace laygauge
