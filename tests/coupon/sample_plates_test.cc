// The whole of this folder on the sample photographs, against the truth they were rendered from.
#include <gtest/gtest.h>

#include <cmath>
#include <opencv2/imgproc.hpp>

#include "coupon/make_patch.h"
#include "photo/srgb.h"
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

// One photo in three states: darker, smaller, both. A placement must not move by what a corner of
// the coupon would show as half a pixel: 0.03 mm, 0.05 degrees.
class ChangedPlates : public ::testing::TestWithParam<const char*> {};

Placement PlacementIn(const SamplePlate& plate, const Well& well) {
  const auto light = EstimateLight(plate.photo, plate.view, plate.sheet, {});
  EXPECT_TRUE(light) << light.error().message;
  const WellFinding finding =
      LocateCoupon(plate.photo, plate.view, *light, plate.sheet, well, ShippedCoupons()[0], {});
  EXPECT_TRUE(finding.placement) << finding.reason;
  return finding.placement.value_or(Placement{});
}

void Darken(double exposure, SamplePlate& plate) {
  cv::Mat table(1, 256, CV_8UC1);
  for (int i = 0; i < 256; ++i) {
    table.at<std::uint8_t>(i) =
        cv::saturate_cast<std::uint8_t>(255 * SrgbFromLinear(exposure * LinearFromSrgb(i / 255.0)));
  }
  cv::Mat darker;
  cv::LUT(plate.photo.encoded, table, darker);
  plate.photo.encoded = darker;
}

void Shrink(double factor, SamplePlate& plate) {
  cv::Mat smaller;
  cv::resize(plate.photo.encoded, smaller, {}, factor, factor, cv::INTER_AREA);
  plate.photo.encoded = smaller;
  Camera& camera = plate.view.camera;
  camera.image_size_px = smaller.size();
  camera.focal_px *= factor;
  camera.center_x_px = (camera.center_x_px + 0.5) * factor - 0.5;
  camera.center_y_px = (camera.center_y_px + 0.5) * factor - 0.5;
}

TEST_P(ChangedPlates, PlacementsStay) {
  const SamplePlate plate = ReadSamplePlate(GetParam());
  SamplePlate dark = plate;
  Darken(0.6, dark);
  SamplePlate small = plate;
  Shrink(0.75, small);
  SamplePlate both = small;
  Darken(0.6, both);
  for (const Well& well : plate.sheet.wells) {
    const Placement before = PlacementIn(plate, well);
    for (const SamplePlate* changed : {&dark, &small, &both}) {
      const Placement after = PlacementIn(*changed, well);
      EXPECT_NEAR(after.center_x_mm, before.center_x_mm, 0.03) << well.name;
      EXPECT_NEAR(after.center_y_mm, before.center_y_mm, 0.03) << well.name;
      EXPECT_NEAR(after.turn_deg, before.turn_deg, 0.05) << well.name;
    }
  }
}

INSTANTIATE_TEST_SUITE_P(All, ChangedPlates, ::testing::Values("d2", "d5", "d6"),
                         [](const auto& tested) { return std::string(tested.param); });

// d8 is cut: what it shows whole is still measured by its true view.
INSTANTIATE_TEST_SUITE_P(All, SamplePlates,
                         ::testing::Values("d1", "d2", "d3", "d4", "d5", "d6", "d7", "d8"),
                         [](const auto& tested) { return std::string(tested.param); });

}  // namespace
}  // namespace laygauge
