#include "texture/wall_gaps.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>

#include "support/render_channels.h"
#include "support/render_lines.h"
#include "texture/channel_kernel.h"

namespace laygauge {
namespace {

enum Column { kShare, kWidth, kMean };
constexpr double kHalfHeightWidths = 2.354820045;  // of a Gaussian, 2 sqrt(2 ln 2)

Finding Measure(const Patch& patch) {
  return WallGapsMetric().measure(MakeSurface(patch, SquareCoupon()));
}

// A dark seam of Gaussian section, 1 mm inside the upper edge, from x = -10 mm to `end_mm`.
Patch WithSeam(double depth, double sd_mm, double end_mm, double level = 0.4) {
  Patch patch = RenderChannels({.level = level, .darkness_mm = [](int, double) { return 0.0; }});
  for (int y = 0; y < patch.relative.rows; ++y) {
    for (int x = 0; x < patch.relative.cols; ++x) {
      const cv::Point2d p = patch.CouponFromPixel({static_cast<double>(x), static_cast<double>(y)});
      float& value = patch.relative.at<float>(y, x);
      if (p.x > -10 && p.x < end_mm) {
        const double z = (p.y + 19.0) / sd_mm;
        value *= static_cast<float>(1 - depth * std::exp(-z * z / 2));
      }
    }
  }
  return patch;
}

// Length of the seam that is judged: 36 mm an edge, and the holes' (radius + 0.9 mm).
double SeamMm() { return 4 * 36 + 2 * std::numbers::pi * (3.9 + 2.5); }

TEST(WallGaps, MeasureShareAndWidthOfAnOpenSeam) {
  for (const double sd_mm : {0.08, 0.1, 0.12}) {
    const Finding walls = Measure(WithSeam(0.6, sd_mm, 6));
    // 16 mm are open; either end is known to a step of 0.25 mm.
    EXPECT_NEAR(*walls.features[kShare].value, 100 * 16 / SeamMm(), 100 * 0.5 / SeamMm()) << sd_mm;
    // Width at half depth, less in quadrature that of a closed seam. Samples 0.05 mm apart miss
    // the deepest point by up to 0.025 mm, which widens the narrowest by 0.004 mm, and bilinear
    // interpolation blurs it by 0.018 mm (0.005 mm); the quadrature doubles both.
    const double want =
        kHalfHeightWidths * std::sqrt(sd_mm * sd_mm - std::pow(ChannelSdMm(0.06), 2));
    EXPECT_NEAR(*walls.features[kWidth].value, want, 0.02) << sd_mm;
    ASSERT_EQ(walls.marks.size(), 1U);
    EXPECT_EQ(walls.marks[0].kind, MarkKind::kWallGap);
    for (const cv::Point2f& p : walls.marks[0].path_mm) {
      EXPECT_NEAR(p.y, -19.0, 0.03);
    }
  }
}

TEST(WallGaps, AClosedSeamHasNone) {
  const Finding walls = Measure(WithSeam(0.15, 0.07, 18));  // as dark as a groove between loops
  EXPECT_EQ(*walls.features[kShare].value, 0);
  EXPECT_EQ(*walls.features[kWidth].value, 0);
  EXPECT_EQ(*walls.features[kMean].value, 0);
  EXPECT_TRUE(walls.marks.empty());
}

TEST(WallGaps, ShortDarkSpotsAreTheEndsOfLines) {
  EXPECT_EQ(*Measure(WithSeam(0.6, 0.08, -9.3)).features[kShare].value, 0);  // 0.7 mm
}

// In white plastic an open seam is lighter: what is too light in gray counts in white.
TEST(WallGaps, AllowForLightInWhitePlastic) {
  EXPECT_EQ(*Measure(WithSeam(0.24, 0.09, 6, 0.4)).features[kShare].value, 0);
  EXPECT_GT(*Measure(WithSeam(0.24, 0.09, 6, 0.9)).features[kShare].value, 5);
}

TEST(WallGaps, WithoutWallsThereIsAReason) {
  const Patch patch = WithSeam(0.6, 0.08, 6);
  CouponDescription coupon = SquareCoupon();
  coupon.wall_mm = 0;
  const Finding walls = WallGapsMetric().measure(MakeSurface(patch, coupon));
  for (const Feature& feature : walls.features) {
    EXPECT_FALSE(feature.value.has_value());
    EXPECT_FALSE(feature.reason.empty());
  }
}

TEST(WallGaps, OnAFailedCouponThereIsAReason) {
  const Patch patch = WithSeam(0.6, 0.08, 6);
  const CouponDescription coupon = SquareCoupon();
  Surface surface = MakeSurface(patch, coupon);
  surface.torn.area_pct = 20;
  const Finding walls = WallGapsMetric().measure(surface);
  ASSERT_EQ(walls.features.size(), WallGapsMetric().features.size());
  for (const Feature& feature : walls.features) {
    EXPECT_FALSE(feature.value.has_value());
    EXPECT_FALSE(feature.reason.empty());
  }
  EXPECT_TRUE(walls.marks.empty());
}

}  // namespace
}  // namespace laygauge
