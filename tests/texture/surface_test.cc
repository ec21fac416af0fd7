#include "texture/surface.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>

#include "support/render_lines.h"

namespace laygauge {
namespace {

// Along a row of the turned field nothing but the interpolation changes; a pixel's coupon point
// has the phase that the grating has there.
TEST(Surface, TurnedFieldShowsTheLinesAlongItsRows) {
  for (const double lay : {0.0, 30.0, 45.0, 90.0, 150.0}) {
    const Patch patch = RenderLines({.pitch_mm = 0.5, .lay_deg = lay, .first = 0.2});
    const AlignedField field = AlignField(patch, lay);
    int pixels = 0;
    for (int y = 0; y < field.relative.rows; y += 7) {
      for (int x = 0; x < field.relative.cols; x += 7) {
        if (field.regions.at<std::uint8_t>(y, x) != static_cast<int>(Region::kField)) {
          continue;
        }
        const cv::Vec2d mm = field.coupon_from_aligned * cv::Vec3d(x, y, 1);
        const double across = AcrossLay({mm[0], mm[1]}, lay);
        const double want = 1 + 0.2 * std::cos(2 * std::numbers::pi * across / 0.5);
        // Steps of 1/64 px are rounded: 1/128 px on either axis moves the steepest slope (0.126 a
        // pixel) by 0.0014; Keys' kernel errs by at most 0.44 % of the amplitude, 0.0009.
        ASSERT_NEAR(field.relative.at<float>(y, x), want, 0.0025) << lay << " " << x << " " << y;
        ++pixels;
      }
    }
    EXPECT_NEAR(pixels * 49, cv::countNonZero(patch.regions == 3), 0.02 * pixels * 49);
  }
}

// Halved pixels are means of 2 x 2, at their common centre; a region is the lowest of the four.
TEST(Surface, HalvedField) {
  const AlignedField field = AlignField(RenderLines({.pitch_mm = 0.5, .lay_deg = 30}), 30);
  const AlignedField half = HalveField(field);
  EXPECT_EQ(half.px_per_mm, 10);
  const int x = half.relative.cols / 3;
  const int y = half.relative.rows / 3;
  const cv::Mat four = field.relative(cv::Rect(2 * x, 2 * y, 2, 2));
  EXPECT_NEAR(half.relative.at<float>(y, x), cv::mean(four)[0], 1e-6);
  const cv::Vec2d centre = half.coupon_from_aligned * cv::Vec3d(x, y, 1);
  const cv::Vec2d want = field.coupon_from_aligned * cv::Vec3d(2 * x + 0.5, 2 * y + 0.5, 1);
  EXPECT_NEAR(cv::norm(centre - want), 0, 1e-12);
}

TEST(Surface, KeepsPatchAndLines) {
  const Patch patch = RenderLines({.pitch_mm = 0.42, .lay_deg = 30});
  const CouponDescription coupon = SquareCoupon();
  const Surface surface = MakeSurface(patch, coupon);
  ASSERT_TRUE(surface.lines.has_value());
  EXPECT_EQ(surface.patch, &patch);
  EXPECT_EQ(surface.coupon, &coupon);
}

}  // namespace
}  // namespace laygauge
