#include "texture/gaps.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>

#include "support/render_channels.h"
#include "support/render_lines.h"

namespace laygauge {
namespace {

constexpr double kOpenDarkness = 0.9;  // docs/metrics.md, "Gaps"

// What a channel of this width takes beyond the closed valley that an evenly lit coupon of 0.4
// reflectance shows.
double DarknessMm(double width_mm) {
  return ClosedValleyDarknessUm({}, 0.4) / 1000 + kOpenDarkness * width_mm;
}

Finding Measure(const Patch& patch, double lay_deg = 45) {
  CouponDescription coupon = SquareCoupon();
  coupon.lay_deg = lay_deg;
  return GapsMetric().measure(MakeSurface(patch, coupon));
}

enum Column { kArea, kCount, kLength, kWide, kLong };

// Common practice: with lines of width w at layer height h laid at a pitch of w - h (1 - pi / 4),
// flow 1 just closes the surface; a flow f leaves the share 1 - f of the section, here as open
// channels of width (1 - f) pitch.
TEST(Gaps, FlowBelowOneLeavesItsShareOpen) {
  const double width_mm = 0.45;
  const double pitch_mm = width_mm - 0.2 * (1 - std::numbers::pi / 4);
  for (const double lay : {0.0, 30.0, 45.0, 120.0}) {
    for (const double flow : {0.88, 0.95, 0.97}) {
      const Patch patch =
          RenderChannels({.pitch_mm = pitch_mm, .lay_deg = lay, .darkness_mm = [&](int, double) {
                            return DarknessMm((1 - flow) * pitch_mm);
                          }});
      const Finding gaps = Measure(patch, lay);
      const double want_pct = 100 * (1 - flow);
      // Sharp boxes look up to 9 % darker or lighter than the rounded channels that the fit
      // expects (channel_kernel_test), closed part and all.
      const double tolerance_mm = 0.09 * DarknessMm((1 - flow) * pitch_mm) / kOpenDarkness;
      EXPECT_NEAR(*gaps.features[kArea].value, want_pct, 100 * tolerance_mm / pitch_mm)
          << lay << " " << flow;
      EXPECT_NEAR(*gaps.features[kWide].value, (1 - flow) * pitch_mm, tolerance_mm)
          << lay << " " << flow;
      // A closed valley's darkness is known to 3 um, 0.91 of which the steps hold
      // (open_channels_test); tiles differ by where their edges cut lines, 0.15 % at most.
      ASSERT_TRUE(gaps.features[kArea].sd.has_value());
      EXPECT_NEAR(*gaps.features[kArea].sd, 100 * 0.91 * 0.003 / kOpenDarkness / pitch_mm, 0.15);
    }
  }
}

TEST(Gaps, ClosedValleysAreNoGaps) {
  // The likeliest darkness is 19 um: at 0.4 of it, below two standard deviations of 4 um, nothing
  // is.
  for (const double share : {0.0, 0.25, 0.5}) {
    const Patch patch = RenderChannels(
        {.noise_sd = 0.01, .darkness_mm = [&](int, double) { return share * DarknessMm(0); }});
    const Finding gaps = Measure(patch);
    EXPECT_EQ(*gaps.features[kArea].value, 0) << share;
    EXPECT_EQ(*gaps.features[kCount].value, 0) << share;
    EXPECT_EQ(*gaps.features[kLong].value, 0) << share;
    EXPECT_TRUE(gaps.marks.empty());
  }
}

// Channels that are open on 10 mm each: number, length, width and place are known.
TEST(Gaps, CountsAndPlacesChannels) {
  const auto darkness = [](int channel, double along_mm) {
    const bool open = channel % 5 == 0 && std::abs(channel) <= 20 && std::abs(along_mm) < 5;
    return DarknessMm(open ? 0.06 : -0.015);
  };
  const Finding gaps = Measure(RenderChannels({.darkness_mm = darkness}));
  // Channels 0, +-5 ... +-20 lie 2 mm apart, 8 mm from the origin at most: of the nine only those
  // 7 and 8 mm from it meet a hole's surroundings. All stay one piece or end early.
  ASSERT_EQ(gaps.marks.size(), 9U);
  const double field_cm2 = cv::countNonZero(SquareCouponRegions(20, 44) == 3) / 40000.0;
  // The area between whole stations: a strip of half a station round the field, 0.125 of 34 mm.
  EXPECT_NEAR(*gaps.features[kCount].value, 9 / field_cm2, 0.04 * 9 / field_cm2);
  // Nine of 10 mm; stations average 0.5 mm, so ends are known to that, and holes may cut off 4 mm.
  EXPECT_NEAR(*gaps.features[kLong].value, 90 / field_cm2, (9 * 0.5 + 4) / field_cm2);
  // Open are 90 mm of the 2800 mm of all valleys: less than a tenth.
  EXPECT_EQ(*gaps.features[kWide].value, 0);
  for (const Mark& mark : gaps.marks) {
    EXPECT_EQ(mark.kind, MarkKind::kGap);
    for (const cv::Point2f& p : mark.path_mm) {
      const double across = AcrossLay(p, 45) / 2.0;
      // a tenth of a pixel of 0.05 mm, over the 2 mm between open channels
      EXPECT_NEAR(across, std::round(across), 0.005 / 2.0);
      EXPECT_LT(std::abs(p.x - p.y) / std::numbers::sqrt2, 5.5);
    }
  }
}

// A track across the lines is as dark as a gap, and none.
TEST(Gaps, AScarAcrossTheLayIsNoGap) {
  Patch patch = RenderChannels({.darkness_mm = [](int, double) { return 0.5 * DarknessMm(0); }});
  for (int y = 0; y < patch.relative.rows; ++y) {
    for (int x = 0; x < patch.relative.cols; ++x) {
      const cv::Point2d p = patch.CouponFromPixel({static_cast<double>(x), static_cast<double>(y)});
      patch.relative.at<float>(y, x) *=
          static_cast<float>(1 - BlurredBox(AcrossLay(p, 115), 0.15, 0.06));
    }
  }
  // The scar crosses a field 34 mm wide: a gap of its width would take 0.15 / 34, 0.4 %.
  EXPECT_LT(*Measure(patch).features[kArea].value, 0.1);
}

// Valleys that are just closed and vary along the lay: within a millimetre by ridges' shadow, over
// many millimetres by lines that wander apart.
TEST(Gaps, RidgesAreNoGapsWanderingLinesAre) {
  const auto area_pct = [](double length_mm) {
    const auto darkness = [&](int channel, double along_mm) {
      const double phase = 1.7 * channel * channel;  // another one for every channel
      return DarknessMm(0) + 0.012 * std::cos(phase + 2 * std::numbers::pi * along_mm / length_mm);
    };
    return *Measure(RenderChannels({.noise_sd = 0.01, .darkness_mm = darkness}))
                .features[kArea]
                .value;
  };
  EXPECT_LT(area_pct(2.4), 0.02);
  // The positive half of the wave, as a mean over a closed darkness known to 3 um: 4.0 um of the
  // pitch (mean of a normal variable's positive part, over the phase; 0.012 / pi if it were known
  // exactly). Sharp boxes look up to 9 % darker than the channels that the fit expects: half of the
  // valleys, by 1.7 um.
  EXPECT_NEAR(area_pct(14), 100 * 0.0040 / kOpenDarkness / 0.4,
              100 * 0.5 * 0.0017 / kOpenDarkness / 0.4);
}

TEST(Gaps, DoNotDependOnExposure) {
  const auto darkness = [](int channel, double) { return DarknessMm(0.01 * (channel % 3)); };
  Patch patch = RenderChannels({.darkness_mm = darkness});
  const double before = *Measure(patch).features[kArea].value;
  patch.relative *= 1.4;
  EXPECT_NEAR(*Measure(patch).features[kArea].value, before, 0.01);  // rounding of float pixels
}

TEST(Gaps, TooSmallAFieldHasAReason) {
  Patch patch = RenderChannels({.darkness_mm = [](int, double) { return 0.03; }});
  patch.regions.setTo(0);
  const Finding gaps = Measure(patch);
  ASSERT_EQ(gaps.features.size(), GapsMetric().features.size());
  for (const Feature& feature : gaps.features) {
    EXPECT_FALSE(feature.value.has_value());
    EXPECT_FALSE(feature.reason.empty());
  }
}

// Common facts of shading: light from one side casts shadow into a valley, and in white plastic
// light goes from wall to wall.
TEST(ClosedValley, IsDarkerInSideLightAndLighterInWhite) {
  EXPECT_GT(ClosedValleyDarknessUm({0, 20}, 0.4), ClosedValleyDarknessUm({0, 0}, 0.4));
  EXPECT_GT(ClosedValleyDarknessUm({10, 0}, 0.4), ClosedValleyDarknessUm({0, 0}, 0.4));
  EXPECT_GT(ClosedValleyDarknessUm({0, 0}, 0.05), ClosedValleyDarknessUm({0, 0}, 0.85));
  EXPECT_GT(ClosedValleyDarknessUm({-200, 0}, 1), 0);
}

// The groove between the wall's loops, rendered as a dark box along every edge of the outline:
// where it runs along the lay it is measured, the others are not.
TEST(GrooveShading, MeasuresTheWallsGrooveAlongTheLay) {
  Patch patch = RenderChannels({.darkness_mm = [](int, double) { return 0.0; }});
  for (int y = 0; y < patch.relative.rows; ++y) {
    for (int x = 0; x < patch.relative.cols; ++x) {
      const cv::Point2d p = patch.CouponFromPixel({static_cast<double>(x), static_cast<double>(y)});
      patch.relative.at<float>(y, x) -=
          static_cast<float>(BlurredBox(std::abs(p.y) - 19.55, 0.04, 0.06) +
                             BlurredBox(std::abs(p.x) - 19.55, 0.01, 0.06));
    }
  }
  // A sharp box against the kernel of a rounded channel: 9 % (see channel_kernel_test), and the
  // holes, which have no groove here: 3 % of the points along the lay.
  EXPECT_NEAR(MeasureGrooveShading(patch, SquareCoupon(), 0).darkness_um, 40, 5);
  EXPECT_NEAR(MeasureGrooveShading(patch, SquareCoupon(), 90).darkness_um, 10, 1.5);
}

// Light from one side makes a dipole of the groove, the derivative of the kernel but for its sign.
// Displaced by as much as coupons are, it has no more darkness than in its place; without a term
// for it, 20 um of tilt would make 6 um of darkness of 0.02 mm.
TEST(GrooveShading, DoesNotTakeADisplacedTiltForDarkness) {
  constexpr double kTiltUm = 20;
  const double sd_mm = std::hypot(0.06, 0.022);  // blur and rounded lips
  for (const double displaced_mm : {-0.02, 0.0, 0.02}) {
    Patch patch = RenderChannels({.darkness_mm = [](int, double) { return 0.0; }});
    for (int y = 0; y < patch.relative.rows; ++y) {
      for (int x = 0; x < patch.relative.cols; ++x) {
        const cv::Point2d p =
            patch.CouponFromPixel({static_cast<double>(x), static_cast<double>(y)});
        // The same way up at the upper and the lower edge.
        const double z = (p.y - (p.y > 0 ? 19.55 : -19.55) - displaced_mm) / sd_mm;
        patch.relative.at<float>(y, x) += static_cast<float>(
            kTiltUm / 1000 * z * std::exp(-z * z / 2) / sd_mm / std::sqrt(2 * std::numbers::pi));
      }
    }
    const GrooveShading shading = MeasureGrooveShading(patch, SquareCoupon(), 0);
    // What the displacement leaves in second order: (0.02 / 0.064)^2 / 2 = 5 % of the tilt as
    // darkness, three times that off the tilt itself; the holes, which have no groove here, are 3 %
    // of the points along the lay.
    EXPECT_NEAR(shading.darkness_um, 0, 0.05 * kTiltUm) << displaced_mm;
    EXPECT_NEAR(shading.tilt_um, kTiltUm, 0.2 * kTiltUm) << displaced_mm;
  }
}

TEST(Gaps, OnAFailedCouponThereIsAReason) {
  const Patch patch = RenderChannels({.darkness_mm = [](int, double) { return 0.06; }});
  const CouponDescription coupon = SquareCoupon();
  Surface surface = MakeSurface(patch, coupon);
  surface.torn.area_pct = 20;
  const Finding gaps = GapsMetric().measure(surface);
  ASSERT_EQ(gaps.features.size(), GapsMetric().features.size());
  for (const Feature& feature : gaps.features) {
    EXPECT_FALSE(feature.value.has_value());
    EXPECT_FALSE(feature.reason.empty());
  }
  EXPECT_TRUE(gaps.marks.empty());
}

}  // namespace
}  // namespace laygauge
