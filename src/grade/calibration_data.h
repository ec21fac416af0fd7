#pragma once

#include <string>
#include <vector>

#include "base/error.h"
#include "grade/grades.h"
#include "grade/results.h"
#include "grade/scale.h"
#include "grade/scale_model.h"

namespace laygauge {

// Grades, comparisons and metrics brought together, by index.
struct CalibrationData {
  std::vector<CouponName> coupons;
  std::vector<std::string> graders;
  std::vector<FeatureTable> features;  // parallel to coupons
  ModelData model;
  std::vector<CouponName> not_measured;
};

// Takes what is measured; a graded coupon without a measured row goes into `not_measured`.
// Problem: from SumDefects, with the coupon's name.
[[nodiscard]] Expected<CalibrationData> JoinGradesAndMetrics(
    const Scale& base, const Measurements& measurements, const std::vector<Judgement>& judgements,
    const std::vector<Preference>& preferences);

// The data without these coupons' grades and comparisons; indices stay.
[[nodiscard]] ModelData WithoutCoupons(const ModelData& data, const std::vector<bool>& left_out);

}  // namespace laygauge
