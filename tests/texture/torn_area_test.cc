#include "texture/torn_area.h"

#include <gtest/gtest.h>

#include <cmath>
#include <limits>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <optional>

#include "base/error.h"
#include "support/draw_defects.h"
#include "support/render_lines.h"
#include "texture/failure_metric.h"

namespace laygauge {
namespace {

LinesToRender GoodLines(std::uint64_t seed) {
  return {.pitch_mm = 0.42,
          .lay_deg = 45,
          .first = 0.1,
          .second = 0.03,
          .wander_mm = 0.02,
          .noise_sd = 0.02,
          .blur_sd_mm = 0.05,
          .seed = seed};
}

// Replaces a disk about `centre_mm` by what `other` shows there.
void ReplaceDisk(cv::Point2d centre_mm, double radius_mm, const Patch& other, Patch& patch) {
  cv::Mat disk = cv::Mat::zeros(patch.relative.size(), CV_8UC1);
  const cv::Point2d centre = patch.PixelFromCoupon(centre_mm);
  cv::circle(disk, {cvRound(centre.x), cvRound(centre.y)}, cvRound(radius_mm * patch.px_per_mm),
             cv::Scalar::all(255), cv::FILLED);
  other.relative.copyTo(patch.relative, disk);
}

double FieldMm2(const Patch& patch) {
  return cv::countNonZero(patch.regions == static_cast<int>(Region::kField)) /
         std::pow(patch.px_per_mm, 2);
}

// A border error of `border_mm` all round a disk.
double AllowedPct(double radius_mm, double border_mm, const Patch& patch) {
  return 100 * 2 * std::numbers::pi * radius_mm * border_mm / FieldMm2(patch);
}

TEST(TornArea, AreaOfTheTurnedLayerIsRight) {
  for (const double turned_lay : {135.0, 90.0, 5.0}) {
    Patch patch = RenderLines(GoodLines(1));
    LinesToRender below = GoodLines(2);
    below.lay_deg = turned_lay;
    ReplaceDisk({2, 5}, 6, RenderLines(below), patch);
    const TornArea area = FindTornArea(ReducedPatch(patch), 45.0);
    const double want = 100 * std::numbers::pi * 36 / FieldMm2(patch);
    // The window of 2.4 mm sees both lays at the border: a layer turned by 90 degrees is told half
    // way, one turned by 40 only where three quarters of the window show it, 0.6 mm inside; the
    // opening and the cells take up to 0.4 mm.
    EXPECT_NEAR(area.area_pct, want, AllowedPct(6, turned_lay > 100 ? 0.4 : 1.0, patch))
        << turned_lay;
    EXPECT_TRUE(area.Failed());
    // The cell at the disk's centre is torn, one 9 mm off is not.
    const cv::Point2d inside = cv::Point2d(2, 5) * area.cells_per_mm + area.origin_cell;
    const cv::Point2d outside = cv::Point2d(-7, 5) * area.cells_per_mm + area.origin_cell;
    EXPECT_EQ(area.torn.at<std::uint8_t>(cvRound(inside.y), cvRound(inside.x)), 255);
    EXPECT_EQ(area.torn.at<std::uint8_t>(cvRound(outside.y), cvRound(outside.x)), 0);
  }
}

TEST(TornArea, LinesThatAreGoneAreFound) {
  Patch patch = RenderLines(GoodLines(1));
  LinesToRender smooth = GoodLines(3);
  smooth.first = 0;
  smooth.second = 0;
  ReplaceDisk({2, 5}, 6, RenderLines(smooth), patch);
  const TornArea area = FindTornArea(ReducedPatch(patch), 45.0);
  // A cell certainly counts where both of its windows, 2.4 mm to each side, hold no lines at all.
  EXPECT_LT(area.area_pct, 100 * std::numbers::pi * 36 / FieldMm2(patch));
  EXPECT_GT(area.area_pct, 100 * std::numbers::pi * std::pow(6 - 2.4, 2) / FieldMm2(patch));
  EXPECT_TRUE(area.Failed());
}

TEST(TornArea, NoneOnTwentyGoodCoupons) {
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    LinesToRender lines = GoodLines(seed);
    lines.first = seed % 2 == 0 ? 0.1 : 0.03;  // some under light along the lines
    Patch patch = RenderLines(lines);
    DrawChannels(40, 0.42, 45, seed, patch);
    DrawTrack({.path_mm = {{-15, -5}, {12, 9}}}, patch);
    EXPECT_EQ(FindTornArea(ReducedPatch(patch), 45.0).area_pct, 0) << seed;
  }
}

TEST(TornArea, NoneWhereNoLinesAreAnywhere) {
  for (std::uint64_t seed = 1; seed <= 10; ++seed) {
    LinesToRender ironed = GoodLines(seed);
    ironed.first = 0;
    ironed.second = 0;
    const Patch patch = RenderLines(ironed);
    EXPECT_EQ(FindTornArea(ReducedPatch(patch), std::nullopt).area_pct, 0) << seed;
    EXPECT_EQ(FindTornArea(ReducedPatch(patch), 45.0).area_pct, 0) << seed;
  }
}

// Coarse JPEG blocks and marks of ironing have directions, but nearly no gradient.
TEST(TornArea, FaintTexturesAreNotTorn) {
  LinesToRender faint = GoodLines(1);
  faint.first = 0.01;
  faint.second = 0;
  faint.noise_sd = 0.001;
  LinesToRender turned = faint;
  turned.lay_deg = 135;
  for (const std::optional<double> lay_deg : {std::optional(45.0), std::optional<double>()}) {
    Patch patch = RenderLines(faint);
    ReplaceDisk({2, 5}, 6, RenderLines(turned), patch);
    EXPECT_EQ(FindTornArea(ReducedPatch(patch), lay_deg).area_pct, 0);
    // The same turn of a texture that is seen is an area of 36 pi mm2.
    faint.first = turned.first = 0.1;
    patch = RenderLines(faint);
    ReplaceDisk({2, 5}, 6, RenderLines(turned), patch);
    EXPECT_TRUE(FindTornArea(ReducedPatch(patch), lay_deg).Failed());
    faint.first = turned.first = 0.01;
  }
}

TEST(TornArea, WhatLiesOffTheCouponIsNotRead) {
  Patch patch = RenderLines(GoodLines(1));
  ReplaceDisk({2, 5}, 6, RenderLines({.lay_deg = 135}), patch);
  const double before = FindTornArea(ReducedPatch(patch), 45.0).area_pct;
  patch.relative.setTo(std::numeric_limits<float>::quiet_NaN(),
                       patch.regions == static_cast<int>(Region::kOff));
  EXPECT_EQ(FindTornArea(ReducedPatch(patch), 45.0).area_pct, before);
}

TEST(TornArea, OptionsAreChecked) {
  EXPECT_NO_THROW(TornAreaOptions{}.Check());
  TornAreaOptions bad;
  bad.min_turn_deg = 90;
  EXPECT_THROW(bad.Check(), BadOption);
}

TEST(FailureMetric, MarksTheTornArea) {
  Patch patch = RenderLines(GoodLines(1));
  ReplaceDisk({2, 5}, 6, RenderLines({.lay_deg = 135}), patch);
  const CouponDescription coupon = SquareCoupon();
  const Metric metric = FailureMetric();
  const Finding finding = metric.measure(MakeSurface(patch, coupon));
  ASSERT_EQ(finding.features.size(), metric.features.size());
  ASSERT_EQ(finding.marks.size(), 1U);
  EXPECT_EQ(finding.marks[0].kind, MarkKind::kFailure);
  EXPECT_TRUE(finding.marks[0].closed);
  for (const cv::Point2f& p : finding.marks[0].path_mm) {
    EXPECT_NEAR(cv::norm(cv::Point2d(p) - cv::Point2d(2, 5)), 6, 1.0);  // rounded, simplified
  }
}

}  // namespace
}  // namespace laygauge
