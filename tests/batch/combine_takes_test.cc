#include "batch/combine_takes.h"

#include <gtest/gtest.h>

#include <cmath>

#include "grade/scale_file.h"

namespace laygauge {
namespace {

PhotoRecord Photo(const std::string& batch, CouponStatus status, double pitch_mm,
                  const std::string& note = "") {
  PhotoRecord record;
  record.batch = batch;
  record.file = batch + ".jpg";
  CouponRecord coupon;
  coupon.well = "A1";
  coupon.status = status;
  coupon.note = note;
  coupon.placement = Placement{.center_x_mm = 10, .center_y_mm = 20, .turn_deg = 1};
  if (status == CouponStatus::kOk) {
    for (const ScaleTerm& term : ShippedScale().terms) {
      coupon.features.push_back({term.range.feature, {term.range.low, 0.0, ""}});
    }
    for (const FeatureRange& watched : ShippedScale().watched) {
      coupon.features.push_back({watched.feature, {watched.low, 0.0, ""}});
    }
    coupon.features.push_back({"x", {pitch_mm, 0.3, ""}});
  }
  record.coupons.push_back(coupon);
  return record;
}

// By hand: mean of 1 and 2; their spread 0.707 / sqrt 2 = 0.5 exceeds what they tell, 0.3 / sqrt 2.
TEST(CombineTakes, AveragesTheTakesOfABatch) {
  const auto rows = CombineTakes(
      {Photo("b", CouponStatus::kOk, 1), Photo("b", CouponStatus::kOk, 2)}, {"x"}, ShippedScale());
  ASSERT_EQ(rows.size(), 1U);
  EXPECT_EQ(rows[0].takes, 2);
  EXPECT_EQ(rows[0].status, CouponStatus::kOk);
  EXPECT_DOUBLE_EQ(rows[0].features[0].value(), 1.5);
  EXPECT_FALSE(rows[0].center_x_mm);  // it lay elsewhere in each take
  const FeatureValue mean = MeanOfTakes({{1.0, 0.3}, {2.0, 0.3}});
  EXPECT_NEAR(mean.sd.value(), 0.5, 1e-12);
  EXPECT_NEAR(MeanOfTakes({{1.5, 0.3}, {1.5, 0.3}}).sd.value(), 0.3 / std::sqrt(2.0), 1e-12);
  EXPECT_FALSE(MeanOfTakes({{std::nullopt, std::nullopt}}).value);
}

TEST(CombineTakes, ATakeThatCannotBeMeasuredIsSaidAndLeftOut) {
  const auto rows = CombineTakes(
      {Photo("b", CouponStatus::kRetake, 0, "blurred"), Photo("b", CouponStatus::kOk, 2)}, {"x"},
      ShippedScale());
  ASSERT_EQ(rows.size(), 1U);
  EXPECT_EQ(rows[0].takes, 1);
  EXPECT_EQ(rows[0].status, CouponStatus::kOk);
  EXPECT_EQ(rows[0].note, "blurred");
  EXPECT_DOUBLE_EQ(rows[0].features[0].value(), 2);
  EXPECT_DOUBLE_EQ(rows[0].center_x_mm.value(), 10);
}

TEST(CombineTakes, NoTakeMeasuredIsRetakeAndNoCouponIsEmpty) {
  const auto retake =
      CombineTakes({Photo("b", CouponStatus::kRetake, 0, "blurred")}, {"x"}, ShippedScale());
  EXPECT_EQ(retake[0].status, CouponStatus::kRetake);
  EXPECT_EQ(retake[0].takes, 0);
  EXPECT_FALSE(retake[0].score);
  EXPECT_FALSE(retake[0].features[0]);
  const auto empty = CombineTakes({Photo("b", CouponStatus::kEmpty, 0)}, {"x"}, ShippedScale());
  EXPECT_EQ(empty[0].status, CouponStatus::kEmpty);
}

TEST(CombineTakes, EachTakeKeepsItsPhoto) {
  const auto rows = EachTake({Photo("b", CouponStatus::kOk, 1), Photo("c", CouponStatus::kOk, 2)},
                             {"x"}, ShippedScale());
  ASSERT_EQ(rows.size(), 2U);
  EXPECT_EQ(rows[1].photo, "c.jpg");
  EXPECT_EQ(rows[1].takes, 1);
}

}  // namespace
}  // namespace laygauge
