#pragma once

#include "cli/program.h"

namespace laygauge {

// laygauge score: photographs to scores.csv, records and pictures.
[[nodiscard]] Command AddScoreCommand(CLI::App& program);

}  // namespace laygauge
