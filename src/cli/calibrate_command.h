#pragma once

#include "cli/program.h"

namespace laygauge {

// laygauge calibrate: fits a scale to hand grades and comparisons.
[[nodiscard]] Command AddCalibrateCommand(CLI::App& program);

}  // namespace laygauge
