#pragma once

#include "cli/program.h"

namespace laygauge {

// laygauge grade: a page on which a person grades the coupons of a result by eye.
[[nodiscard]] Command AddGradeCommand(CLI::App& program);

}  // namespace laygauge
