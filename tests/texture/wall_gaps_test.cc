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

// Where the seam is open along 16 mm, the width counts as if 5 mm more had been seen closed.
constexpr double kShrunk = 16.0 / (16 + 5);

TEST(WallGaps, MeasureShareAndWidthOfAnOpenSeam) {
  for (const double sd_mm : {0.08, 0.1, 0.12}) {
    const Finding walls = Measure(WithSeam(0.6, sd_mm, 6));
    // 16 mm are open; either end is known to a step of 0.25 mm.
    EXPECT_NEAR(*walls.features[kShare].value, 100 * 16 / SeamMm(), 100 * 0.5 / SeamMm()) << sd_mm;
    // The mean of two widths. At half depth, less in quadrature that of a closed seam: samples
    // 0.05 mm apart miss the deepest point by up to 0.025 mm, which widens the narrowest by
    // 0.004 mm, and bilinear interpolation blurs it by 0.018 mm (0.005 mm); the quadrature doubles
    // both. By the light, 0.6 times the width: the integral of the Gaussian down to a tenth of its
    // depth, 2.146 standard deviations to either side, to a sample's share, 0.06 * 0.05 mm / 0.6.
    const double at_half_mm =
        kHalfHeightWidths * std::sqrt(sd_mm * sd_mm - std::pow(ChannelSdMm(0.06), 2));
    const double by_light_mm =
        sd_mm * std::sqrt(2 * std::numbers::pi) * std::erf(2.146 / std::numbers::sqrt2);
    EXPECT_NEAR(*walls.features[kWidth].value, kShrunk * (at_half_mm + by_light_mm) / 2,
                (0.02 + 0.005) / 2)
        << sd_mm;
    EXPECT_NEAR(*walls.features[kMean].value, (at_half_mm + by_light_mm) / 2 * 16 / SeamMm(),
                (0.02 + 0.005) / 2 * 16 / SeamMm() + 0.2 * 0.5 / SeamMm())
        << sd_mm;
    ASSERT_EQ(walls.marks.size(), 1U);
    EXPECT_EQ(walls.marks[0].kind, MarkKind::kWallGap);
    for (const cv::Point2f& p : walls.marks[0].path_mm) {
      EXPECT_NEAR(p.y, -19.0, 0.03);
    }
  }
}

// A seam that opens, and one that grows longer, move the columns little by little: at once, it
// would be 0.2 mm, and 9 % of the seam. From 0.2 to 0.28 of depth it opens, an eighth a step; of a
// piece, 0.25 mm of 175 a step are open besides, and 1.25 mm are taken for one by fifths.
TEST(WallGaps, OpenWithoutAStep) {
  const auto largest_steps = [](const auto& patch, int count) {
    double width_step = 0;
    double share_step = 0;
    Finding last = Measure(patch(0));
    EXPECT_EQ(*last.features[kWidth].value, 0);
    for (int i = 1; i <= count; ++i) {
      Finding now = Measure(patch(i));
      width_step = std::max(width_step, *now.features[kWidth].value - *last.features[kWidth].value);
      share_step = std::max(share_step, *now.features[kShare].value - *last.features[kShare].value);
      last = std::move(now);
    }
    EXPECT_GT(*last.features[kWidth].value, 0.03);
    EXPECT_LT(width_step, 0.04);
    EXPECT_LT(share_step, 1.5);
  };
  largest_steps([](int i) { return WithSeam(0.2 + 0.01 * i, 0.1, 6); }, 8);
  largest_steps([](int i) { return WithSeam(0.3, 0.1, -9.5 + 0.25 * i); }, 7);
}

TEST(WallGaps, AClosedSeamHasNone) {
  const Finding walls = Measure(WithSeam(0.15, 0.07, 18));  // as dark as a groove between loops
  EXPECT_EQ(*walls.features[kShare].value, 0);
  EXPECT_EQ(*walls.features[kWidth].value, 0);
  EXPECT_EQ(*walls.features[kMean].value, 0);
  EXPECT_TRUE(walls.marks.empty());
}

// Lines along two edges: the valley next to the wall is the seam, the others are channels.
TEST(WallGaps, OpenChannelsAlongAnEdgeAreNoSeam) {
  constexpr double kSeamMm = 19.1;
  for (const double lay : {0.0, 90.0}) {
    for (const int lines : {46, 50, 54}) {
      const double pitch_mm = kSeamMm / lines;
      const Patch patch = RenderChannels(
          {.pitch_mm = pitch_mm, .lay_deg = lay, .darkness_mm = [&](int channel, double) {
             return std::abs(channel) < lines ? 0.08 : 0.0;
           }});
      // A channel that touches a hole's wall is a seam for as long as it does.
      for (const Mark& mark : Measure(patch).marks) {
        for (const cv::Point2f& p : mark.path_mm) {
          EXPECT_LT(std::max(std::abs(p.x), std::abs(p.y)), 18) << lay << " " << pitch_mm;
        }
      }
    }
  }
}

TEST(WallGaps, ShortDarkSpotsAreTheEndsOfLines) {
  EXPECT_EQ(*Measure(WithSeam(0.6, 0.08, -9.6)).features[kShare].value, 0);  // 0.4 mm
}

// In white plastic an open seam is lighter: what is too light in gray counts in white.
TEST(WallGaps, AllowForLightInWhitePlastic) {
  EXPECT_EQ(*Measure(WithSeam(0.19, 0.09, 6, 0.4)).features[kShare].value, 0);
  EXPECT_GT(*Measure(WithSeam(0.19, 0.09, 6, 0.9)).features[kShare].value, 5);
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
