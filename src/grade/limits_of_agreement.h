#pragma once

#include <span>

#include "base/error.h"

namespace laygauge {

// Differences a - b of paired measurements: Bland & Altman, "Statistical methods for assessing
// agreement between two methods of clinical measurement", Lancet i (1986) 307-310,
// doi:10.1016/S0140-6736(86)90837-8.
struct LimitsOfAgreement {
  double mean = 0;
  double sd = 0;   // divisor n - 1
  double low = 0;  // mean -+ 1.96 sd: nineteen of twenty differences lie between
  double high = 0;
  double mean_low = 0;  // 95 % confidence interval of the mean (Student's t)
  double mean_high = 0;
  double limit_standard_error = 0;  // of each limit: sqrt(3 sd^2 / n)
};

// Problem: fewer than 2 pairs.
[[nodiscard]] Expected<LimitsOfAgreement> CompareMeans(std::span<const double> a,
                                                       std::span<const double> b);

}  // namespace laygauge
