#pragma once

#include "cli/program.h"

namespace laygauge {

// laygauge agree: how far graders agree with each other and with the scores.
[[nodiscard]] Command AddAgreeCommand(CLI::App& program);

}  // namespace laygauge
