#include "coupon/make_patch.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>

#include "coupon/render_scene.h"

namespace laygauge {
namespace {

using ::testing::HasSubstr;

const CouponRegions& Square40Regions() {
  static const CouponRegions regions = MakeRegions(ShippedCoupons()[0], {});
  return regions;
}

Placement At(double x_mm, double y_mm, double turn_deg) {
  Placement placement;
  placement.center_x_mm = x_mm;
  placement.center_y_mm = y_mm;
  placement.turn_deg = turn_deg;
  return placement;
}

Expected<Patch> PatchOf(const std::function<double(const cv::Point2d&)>& scene,
                        const Light& light) {
  const View view = MakeView({});
  return MakePatch(RenderPlane(view, 2.5, scene), view, light, At(53, 48, 30), 2.5,
                   Square40Regions(), {});
}

TEST(MakePatch, LightAndExposureDropOut) {
  Light light = EvenLight(0.5);
  light.degree = 1;
  light.coefficients = {std::log(0.5), -0.1, 0.4};  // 1, y, x
  const auto surface = [](const cv::Point2d& p) {
    // The frame is turned by 30 degrees: its y axis points to (0.5, 0.866) on the sheet.
    return 0.3 * (1 + 0.2 * std::sin(2 * CV_PI * (0.5 * p.x + 0.8660254 * p.y) / 0.5));
  };
  const auto patch =
      PatchOf([&](const cv::Point2d& p) { return light.At(p.x, p.y) * surface(p); }, light);
  ASSERT_TRUE(patch) << patch.error().message;
  EXPECT_NEAR(patch->level, 0.3, 0.001);
  EXPECT_NEAR(cv::mean(patch->relative, patch->regions == 3)[0], 1, 1e-5);
  // Waves along the patch's y: rows are constant to the interpolation's error.
  cv::Mat row_mean;
  cv::reduce(patch->relative, row_mean, 1, cv::REDUCE_AVG);
  EXPECT_LT(cv::norm(patch->relative.col(100), row_mean, cv::NORM_INF), 0.005);
  cv::Scalar mean;
  cv::Scalar deviation;
  cv::meanStdDev(row_mean, mean, deviation);
  EXPECT_NEAR(deviation[0] * std::sqrt(2.0), 0.2, 0.002);  // of a sinusoid's amplitude
}

TEST(MakePatch, RefusesOverexposedAndDarkCoupons) {
  auto patch = PatchOf([](const cv::Point2d& p) { return p.x < 50 ? 1.0 : 0.5; }, EvenLight(0.9));
  ASSERT_FALSE(patch);
  EXPECT_THAT(patch.error().message, HasSubstr("over-exposed"));
  patch = PatchOf([](const cv::Point2d&) { return 0.001; }, EvenLight(0.5));
  ASSERT_FALSE(patch);
  EXPECT_THAT(patch.error().message, HasSubstr("too dark"));
}

TEST(MakePatch, OptionsAreChecked) {
  EXPECT_NO_THROW(PatchOptions().Check());
  EXPECT_THROW(PatchOptions{.most_clipped_pct = -1}.Check(), BadOption);
}

}  // namespace
}  // namespace laygauge
