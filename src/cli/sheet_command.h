#pragma once

#include "cli/program.h"

namespace laygauge {

// laygauge sheet: draws a capture sheet and writes its description.
[[nodiscard]] Command AddSheetCommand(CLI::App& program);

}  // namespace laygauge
