#pragma once

#include <functional>
#include <string>
#include <vector>

#include "grade/agreement.h"
#include "grade/fit_scale.h"
#include "grade/suggest.h"

namespace laygauge {

// What one named loss does over the graded coupons.
struct LossShare {
  std::string loss;
  double mean_points = 0;
  double most_points = 0;
  double share = 0;  // of the scores' variance (covariance of loss and score), all shares sum to 1
};
// The most telling first. Problem: from ScoreCoupon.
[[nodiscard]] Expected<std::vector<LossShare>> LossShares(const Scale& scale,
                                                          const Measurements& measurements);

// Everything that a calibration tells a person.
struct CalibrationReport {
  CalibratedScale fit;
  AgreementReport agreement;
  std::vector<LossShare> losses;
  SuggestedGrades suggested;
};
[[nodiscard]] Expected<CalibrationReport> ReportCalibration(
    const CalibratedScale& fit, const Measurements& measurements,
    const std::vector<Judgement>& judgements);

// `picture_of` names a coupon's picture.
[[nodiscard]] std::string FormatCalibration(
    const CalibrationReport& report,
    const std::function<std::string(const CouponName&)>& picture_of);

}  // namespace laygauge
