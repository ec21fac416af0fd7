// The whole of this folder on the sample photographs, against the truth they were rendered from.
#include <gtest/gtest.h>

#include <cmath>

#include "coupon/make_patch.h"
#include "support/sample_plate.h"

namespace laygauge {
namespace {

constexpr double kCenterTolerance_mm = 0.10;  // what docs/validation.md promises
constexpr double kTurnTolerance_deg = 0.2;

class SamplePlates : public ::testing::TestWithParam<const char*> {};

TEST_P(SamplePlates, EveryCouponIsFoundWhereItLies) {
  const SamplePlate plate = ReadSamplePlate(GetParam());
  const CouponDescription& coupon = ShippedCoupons()[0];
  const auto light = EstimateLight(plate.photo, plate.view, plate.sheet, {});
  ASSERT_TRUE(light) << light.error().message;
  ASSERT_TRUE(light->tone);
  EXPECT_NEAR(light->tone->gamma, 1, 0.02);  // rendered with the sRGB curve
  const CouponRegions regions = MakeRegions(coupon, {});
  double worst_mm = 0;
  double worst_deg = 0;
  for (const auto& truth : plate.truth.at("coupons")) {
    const Well* well = plate.sheet.FindWell(truth.at("well").get<std::string>());
    ASSERT_NE(well, nullptr);
    const WellFinding finding =
        LocateCoupon(plate.photo, plate.view, *light, plate.sheet, *well, coupon, {});
    ASSERT_EQ(finding.state, WellState::kCoupon) << finding.reason;
    EXPECT_EQ(finding.reason, "");
    const Placement& placement = *finding.placement;
    const double off_mm = std::hypot(placement.center_x_mm - truth.at("at_mm")[0].get<double>(),
                                     placement.center_y_mm - truth.at("at_mm")[1].get<double>());
    const double off_deg = std::abs(placement.turn_deg - truth.at("turn_deg").get<double>());
    EXPECT_LT(off_mm, kCenterTolerance_mm) << well->name;
    EXPECT_LT(off_deg, kTurnTolerance_deg) << well->name;
    worst_mm = std::max(worst_mm, off_mm);
    worst_deg = std::max(worst_deg, off_deg);
    const auto patch =
        MakePatch(plate.photo, plate.view, *light, placement, plate.thickness_mm, regions, {});
    ASSERT_TRUE(patch) << well->name << ": " << patch.error().message;
    EXPECT_NEAR(cv::mean(patch->relative, patch->regions == 3)[0], 1, 1e-4);
  }
  std::cout << plate.name << ": centre within " << worst_mm << " mm, turn within " << worst_deg
            << " deg, light uneven by " << 100 * light->unevenness << " %\n";
}

// d8 is cut: what it shows whole is still measured by its true view.
INSTANTIATE_TEST_SUITE_P(All, SamplePlates,
                         ::testing::Values("d1", "d2", "d3", "d4", "d5", "d6", "d7", "d8"),
                         [](const auto& tested) { return std::string(tested.param); });

}  // namespace
}  // namespace laygauge
