// The whole chain on the sample plates, against what they were rendered from. The tolerances are
// the figures that the instrument promises (docs/validation.md).

#include <gtest/gtest.h>

#include <cmath>

#include "base/statistics.h"
#include "batch/measured_plates.h"

namespace laygauge {
namespace {

TEST(SamplePlates, EveryCouponIsFoundAndMeasured) {
  ASSERT_EQ(MeasuredPlates().size(), 7U);
  EXPECT_EQ(MeasuredCoupons().size(), 15U + 6 * 6);
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    EXPECT_EQ(coupon.record->status, CouponStatus::kOk)
        << coupon.Name() << ": " << coupon.record->note;
  }
}

TEST(SamplePlates, ReprojectionIsWithinThreeTenthsOfAPixel) {
  for (const PhotoRecord& record : MeasuredPlates()) {
    EXPECT_LE(record.camera.rms_px, 0.3) << record.file;
  }
}

TEST(SamplePlates, CentreAndTurnAreTrue) {
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    ASSERT_TRUE(coupon.record->placement) << coupon.Name();
    const Placement& place = *coupon.record->placement;
    EXPECT_LE(std::hypot(place.center_x_mm - coupon.truth.center_x_mm,
                         place.center_y_mm - coupon.truth.center_y_mm),
              0.10)
        << coupon.Name();
    EXPECT_LE(std::abs(place.turn_deg - coupon.truth.turn_deg), 0.2) << coupon.Name();
  }
}

// Errors of the pitch in per cent and of the lay in degrees, raster coupons.
TEST(SamplePlates, PitchAndLayAreTrue) {
  std::vector<double> pitch_errors_pct;
  for (const MeasuredCoupon& coupon : MeasuredCoupons()) {
    if (coupon.truth.kind != "raster") continue;
    const auto pitch_mm = coupon.Value("pitch_mm");
    const auto lay_deg = coupon.Value("lay_deg");
    ASSERT_TRUE(pitch_mm && lay_deg) << coupon.Name();
    const double true_pitch_mm = coupon.truth.numbers.at("pitch_mm");
    pitch_errors_pct.push_back(100 * std::abs(*pitch_mm / true_pitch_mm - 1));
    EXPECT_LE(pitch_errors_pct.back(), 0.4) << coupon.Name();
    const double off_deg = std::remainder(*lay_deg - coupon.truth.numbers.at("lay_deg"), 180);
    EXPECT_LE(std::abs(off_deg), 0.3) << coupon.Name();
  }
  ASSERT_FALSE(pitch_errors_pct.empty());
  EXPECT_LE(Median(pitch_errors_pct), 0.15);
}

// Common practice: grade 1 is a delaminated print, 10 is as good as ironed.
TEST(SamplePlates, TheDelaminatedCouponIsLowestAndTheIronedOneHighest) {
  for (const MeasuredCoupon& extreme : MeasuredCoupons()) {
    for (const MeasuredCoupon& other : MeasuredCoupons()) {
      if (other.plate != extreme.plate || other.record == extreme.record) continue;
      ASSERT_TRUE(extreme.record->score && other.record->score);
      if (extreme.truth.kind == "delaminated") {
        EXPECT_LT(extreme.record->score->value, other.record->score->value)
            << extreme.Name() << " is delaminated, " << other.Name() << " is not";
      }
      if (extreme.truth.kind == "ironed") {
        EXPECT_GT(extreme.record->score->value, other.record->score->value)
            << extreme.Name() << " is ironed, " << other.Name() << " is not";
      }
    }
  }
}

}  // namespace
}  // namespace laygauge
