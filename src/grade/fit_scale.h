#pragma once

#include <optional>
#include <string>
#include <vector>

#include "base/error.h"
#include "grade/grades.h"
#include "grade/results.h"
#include "grade/scale.h"
#include "grade/scale_model.h"

namespace laygauge {

struct FitOptions {
  std::string name;        // of the new scale
  std::string remark;      // what must be said wherever its scores show; may be empty
  std::string conditions;  // lights, finishes, sizes
  int panel = 3;           // score_sd is meant for the mean grade of so many graders
  // Its terms are fitted, and its weights are what is assumed before the grades: the shipped scale,
  // or a bare one to begin with. A scale without graded coupons gives no ranges.
  Scale base;

  void Check() const;
};

// How a grader differs from the panel.
struct GraderStrictness {
  std::string grader;
  int grades = 0;
  double points = 0;  // what he adds: below 0 is strict
  double sd = 0;
};

// A graded coupon, and what a scale made without it says.
struct LeftOutCoupon {
  CouponName coupon;
  double grade = 0;  // the graders' mean, their strictness taken off
  double score = 0;
  double sd = 0;  // of the grade about the score, as foretold
};

struct CalibratedScale {
  Scale scale;
  std::vector<GraderStrictness> graders;
  std::vector<LeftOutCoupon> by_coupon;  // in the order of Scale::coupons that have grades
  std::vector<LeftOutCoupon> by_batch;   // empty with fewer than 3 graded batches
  std::vector<CouponName> not_measured;  // graded, but no row of theirs is ok
  double weight_spread = 0;              // how far the weights may leave the base's, relative
  double coupon_sd = 0;                  // points that the metrics do not see
  int comparisons = 0;
  int comparisons_foretold = 0;  // whose better coupon has the higher score
};

// Fits the scale (docs/scale.md): FitModel, the spread of the weights and the noise chosen by the
// evidence, score_sd brought to what leaving out finds. Problem: CheckGradesTeach,
// CheckCouponsKnown, or fewer than 6 of the graded coupons measured.
[[nodiscard]] Expected<CalibratedScale> FitScale(const Measurements& measurements,
                                                 const std::vector<Judgement>& judgements,
                                                 const std::vector<Preference>& preferences,
                                                 const FitOptions& options);

// Errors of left-out scores as figures.
[[nodiscard]] ScaleAccuracy SummariseErrors(const std::vector<LeftOutCoupon>& coupons,
                                            std::string left_out);

}  // namespace laygauge
