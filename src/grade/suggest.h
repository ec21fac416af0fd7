#pragma once

#include <vector>

#include "grade/grades.h"
#include "grade/results.h"
#include "grade/scale.h"

namespace laygauge {

// A coupon whose grade would teach the scale most, given those before it in the list.
struct Suggestion {
  CouponName coupon;
  double score = 0;
  double sd_after = 0;  // SuggestedGrades::sd_now once it and all before it have a grade
};

struct SuggestedGrades {
  double sd_now = 0;  // points: what the weights leave open, root mean square over the coupons
  std::vector<Suggestion> coupons;
};

// The greedy choice by the expected fall of the scores' variance over all measured coupons, each
// new grade being as good as one grader's (active learning by variance: Cohn, Ghahramani & Jordan,
// "Active learning with statistical models", Journal of Artificial Intelligence Research 4 (1996)
// 129-145, doi:10.1613/jair.295). Only coupons that the scale was not fitted to; fewer than `count`
// if there are not so many. Problem: from SumDefects.
[[nodiscard]] Expected<SuggestedGrades> SuggestGrades(const Scale& scale,
                                                      const Measurements& measurements, int count);

}  // namespace laygauge
