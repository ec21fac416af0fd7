#include "grade/suggest.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>

#include "grade/scale_example.h"

namespace laygauge {
namespace {

using ::testing::SizeIs;

MeasuredCoupon Measured(double gap, double ridge) {
  return {"scores.csv", "ok", ExampleFeatures(gap, ridge), std::nullopt};
}

// The gap weight is known and the ridge weight is not: the coupon with ridges teaches. A scale that
// has graded it does not ask for it again.
TEST(Suggest, TheCouponThatShowsTheUnknownWeight) {
  Scale scale = ExampleScale();
  scale.coupons.clear();
  scale.covariance = Eigen::Vector2d(1e-6, 0.5).asDiagonal();
  const Measurements measurements{{{"b", "A1"}, Measured(8, 0)},
                                  {{"b", "A2"}, Measured(0, 15)},
                                  {{"b", "A3"}, Measured(0, 0)},
                                  {{"b", "A4"}, {"scores.csv", "retake", {}, std::nullopt}}};
  const SuggestedGrades suggested = SuggestGrades(scale, measurements, 2).value();
  ASSERT_THAT(suggested.coupons, SizeIs(2));
  EXPECT_EQ(suggested.coupons[0].coupon.well, "A2");
  EXPECT_LT(suggested.coupons[0].sd_after, suggested.sd_now);
  EXPECT_LE(suggested.coupons[1].sd_after, suggested.coupons[0].sd_after);
  scale.coupons = {{"b", "A2", 8.0, 8.0}};
  const SuggestedGrades others = SuggestGrades(scale, measurements, 5).value();
  ASSERT_THAT(others.coupons, SizeIs(2));
  EXPECT_NE(others.coupons[0].coupon.well, "A2");
}

// One weight, one coupon: variances in parallel, by hand. Lever d score / d weight = -exp(-D/9) t.
TEST(Suggest, ExpectedDeviationByHand) {
  Scale scale = ExampleScale();
  scale.coupons.clear();
  scale.covariance = Eigen::Vector2d(1e-12, 0.5).asDiagonal();
  const Measurements measurements{{{"b", "A1"}, Measured(0, 10)}};
  const SuggestedGrades suggested = SuggestGrades(scale, measurements, 1).value();
  const double lever = std::exp(-1.0 / 9);
  const double before = 0.5 * lever * lever;
  const double noise = 0.09 - 0.16 / 3 + 0.16;  // residual without the panel's part, one grade
  EXPECT_NEAR(suggested.sd_now, std::sqrt(before), 1e-6);
  EXPECT_NEAR(suggested.coupons[0].sd_after, std::sqrt(before * noise / (before + noise)), 1e-6);
}

}  // namespace
}  // namespace laygauge
