#pragma once

#include <string>

#include "report/result.h"

namespace laygauge {

struct ScoreTableOptions {
  bool colour = false;  // ANSI colours, for terminals
};

// The result for a person: worst coupon first, the reasons beside each score; what could not be
// scored comes last, with its reason. Empty wells are only counted.
[[nodiscard]] std::string FormatScoreTable(const ResultTable& table,
                                           const ScoreTableOptions& options);

}  // namespace laygauge
