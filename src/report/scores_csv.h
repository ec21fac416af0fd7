#pragma once

#include <string>

#include "report/result.h"

namespace laygauge {

// scores.csv (docs/formats.md): one row a coupon, RFC 4180. What is unknown is an empty field.
[[nodiscard]] std::string FormatScoresCsv(const ResultTable& table);

// The same rows as JSON, for programs: numbers as numbers, what is unknown as null.
[[nodiscard]] std::string FormatScoresJson(const ResultTable& table);

}  // namespace laygauge
