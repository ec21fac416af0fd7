#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>

#include "base/error.h"
#include "support/draw_defects.h"
#include "support/render_lines.h"
#include "texture/scars_metric.h"
#include "texture/tracks.h"

namespace laygauge {
namespace {

constexpr double kPi = std::numbers::pi;

// At each end: a step of following, 0.6 mm; a quarter of a piece, 0.75 mm, that noise moves the
// place at which half of the strength is left; and the stripe that is followed lies 0.18 mm, with
// the reach of a step aside 0.33 mm, off the middle.
constexpr double kEndMm = 1.7;

Patch GoodLines(std::uint64_t seed, double lay_deg = 45) {
  Patch patch = RenderLines({.pitch_mm = 0.42,
                             .lay_deg = lay_deg,
                             .first = 0.1,
                             .second = 0.03,
                             .wander_mm = 0.02,
                             .noise_sd = 0.02,
                             .blur_sd_mm = 0.05,
                             .seed = seed});
  DrawChannels(40, 0.42, lay_deg, seed, patch);
  return patch;
}

struct Found {
  std::vector<Track> tracks;
  TopView view;
};

Found FindOn(const Patch& patch, double lay_deg = 45) {
  Found found;
  found.view =
      MakeTopView(ReducedPatch(patch), lay_deg, FindTornArea(ReducedPatch(patch), lay_deg));
  found.tracks = FindTracks(found.view);
  return found;
}

cv::Point2d OnCircle(double radius, double degrees) {
  return {radius * std::cos(degrees * kPi / 180), -radius * std::sin(degrees * kPi / 180)};
}

TEST(Scars, LengthAndEndsOfATrackAcrossTheLines) {
  for (const double lay : {0.0, 30.0, 45.0, 110.0}) {
    for (const double angle : {25.0, 60.0, 90.0, 130.0, 155.0}) {
      Patch patch = GoodLines(7, lay);
      const cv::Point2d half = OnCircle(6, lay + angle);
      DrawTrack({.path_mm = {-half, half}}, patch);
      const Found found = FindOn(patch, lay);
      ASSERT_EQ(found.tracks.size(), 1U) << lay << " " << angle;
      const Track& track = found.tracks[0];
      EXPECT_NEAR(track.length_mm, 12, 2 * kEndMm) << lay << " " << angle;
      cv::Point2d first = found.view.CouponPoint(track.path_px.front());
      cv::Point2d last = found.view.CouponPoint(track.path_px.back());
      if (cv::norm(first - half) < cv::norm(first + half)) {
        std::swap(first, last);
      }
      EXPECT_LT(cv::norm(first + half), kEndMm) << lay << " " << angle;
      EXPECT_LT(cv::norm(last - half), kEndMm) << lay << " " << angle;
    }
  }
}

TEST(Scars, AGentlyBentTrackIsOne) {
  Patch patch = GoodLines(3);
  std::vector<cv::Point2d> arc;  // of a circle of 80 mm
  for (int degrees = 37; degrees <= 53; degrees += 2) {
    arc.push_back(OnCircle(80, degrees) + cv::Point2d(-56.5, 56.5));
  }
  DrawTrack({.path_mm = arc}, patch);
  const Found found = FindOn(patch);
  ASSERT_EQ(found.tracks.size(), 1U);
  EXPECT_NEAR(found.tracks[0].length_mm, 16 * kPi / 180 * 80, 2 * kEndMm);
}

// Short and faint: followed into noise, it would grow by more than a millimetre at each end.
TEST(Scars, AShortTrackKeepsItsLength) {
  constexpr int kSeeds = 24;
  double length_mm = 0;
  for (std::uint64_t seed = 1; seed <= kSeeds; ++seed) {
    Patch patch = GoodLines(seed);
    const cv::Point2d half = OnCircle(2.5, 45 + 80);
    DrawTrack({.path_mm = {-half, half}, .edge = -0.06, .groove = 0.02}, patch);
    const Found found = FindOn(patch);
    ASSERT_FALSE(found.tracks.empty()) << seed;
    EXPECT_GE(found.tracks[0].chance, 0.5) << seed;
    length_mm += found.tracks[0].length_mm / kSeeds;
  }
  EXPECT_NEAR(length_mm, 5, kEndMm);
}

TEST(Scars, TwoThatCrossAreTwo) {
  Patch patch = GoodLines(4);
  DrawTrack({.path_mm = {{-6, -12}, {5, 6}}}, patch);
  DrawTrack({.path_mm = {{-14, -2}, {6, -4}}, .edge = 0.2, .groove = -0.05}, patch);
  const Found found = FindOn(patch);
  ASSERT_EQ(found.tracks.size(), 2U);
  const double length = found.tracks[0].length_mm + found.tracks[1].length_mm;
  EXPECT_NEAR(length, std::hypot(11, 18) + std::hypot(20, 2), 4 * kEndMm);
}

// The hole of 3.2 mm with its wall and seam hides 3.2 + 2 x 1.4 mm of the track.
TEST(Scars, ATrackAcrossAHoleIsOneAndItsHiddenPartIsNotCounted) {
  Patch patch = GoodLines(5);
  DrawTrack({.path_mm = {{-10, -1}, {-10, 16.5}}}, patch);
  const Found found = FindOn(patch);
  ASSERT_EQ(found.tracks.size(), 1U);
  // The pieces at the hole's two sides are half hidden themselves: half a millimetre each.
  EXPECT_NEAR(found.tracks[0].length_mm, 17.5 - 6, 2 * kEndMm + 1);
}

// Lumps as bright as this are drawn 0.6 to 1 mm wide (two deviations and more).
TEST(Scars, ALumpIsNone) {
  for (const double radius : {0.2, 0.3, 0.4}) {
    Patch patch = GoodLines(13);
    for (const cv::Point2d& place :
         {cv::Point2d(-12, -12), cv::Point2d(1, 3), cv::Point2d(11, 8)}) {
      DrawBlob({.centre_mm = place, .radius_mm = radius, .lit = 0.6, .shine = 0.6}, patch);
    }
    EXPECT_TRUE(FindOn(patch).tracks.empty()) << radius;
  }
}

// Promised: at most one false scar on ten coupons; a doubtful track counts by its chance.
TEST(Scars, HardlyAnyOnTwentyGoodCoupons) {
  double count = 0;
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    for (const Track& track : FindOn(GoodLines(seed)).tracks) {
      count += track.chance;
    }
  }
  EXPECT_LT(count, 0.5);
}

TEST(Scars, AChannelAlongTheLinesIsNone) {
  Patch patch = GoodLines(6);
  DrawChannel({.centre_mm = {0, 6}, .length_mm = 15, .lay_deg = 45, .depth = 0.5}, patch);
  EXPECT_TRUE(FindOn(patch).tracks.empty());
}

TEST(Scars, WhatLiesOffTheCouponIsNotRead) {
  Patch patch = GoodLines(7);
  DrawTrack({.path_mm = {{-6, -10}, {3, 8}}}, patch);
  const Found before = FindOn(patch);
  patch.relative.setTo(std::numeric_limits<float>::quiet_NaN(),
                       patch.regions == static_cast<int>(Region::kOff));
  const Found after = FindOn(patch);
  ASSERT_EQ(before.tracks.size(), 1U);
  ASSERT_EQ(after.tracks.size(), 1U);
  EXPECT_EQ(after.tracks[0].length_mm, before.tracks[0].length_mm);
}

// Relative reflectance scaled about 1, as by another light: nothing but rounding may change.
TEST(Scars, ContrastDropsOut) {
  Patch patch = GoodLines(8);
  DrawTrack({.path_mm = {{-6, -10}, {3, 8}}}, patch);
  const double before = FindOn(patch).tracks.at(0).length_mm;
  patch.relative = 1 + 0.4 * (patch.relative - 1);
  EXPECT_NEAR(FindOn(patch).tracks.at(0).length_mm, before, 0.1);
}

TEST(Scars, OptionsAreChecked) {
  EXPECT_NO_THROW(TrackOptions{}.Check());
  TrackOptions bad;
  bad.follow_length_mm = bad.detect_length_mm + 1;
  EXPECT_THROW(bad.Check(), BadOption);
}

TEST(ScarsMetric, CountsByAreaAndMarks) {
  Patch patch = GoodLines(9);
  DrawTrack({.path_mm = {{-8, -6}, {7, -2}}}, patch);
  const CouponDescription coupon = SquareCoupon();
  const Metric metric = ScarsMetric();
  const Finding finding = metric.measure(MakeSurface(patch, coupon));
  ASSERT_EQ(finding.features.size(), metric.features.size());
  EXPECT_NEAR(finding.features[1].value.value(), std::hypot(15, 4), 2 * kEndMm);
  EXPECT_EQ(finding.features[2].value.value(), 1);
  // 40 mm less walls of 0.9 mm and their seam of 0.5 mm, less the two holes with theirs.
  const double area_cm2 = (37.2 * 37.2 - kPi * (4.4 * 4.4 + 3.0 * 3.0)) / 100;
  EXPECT_NEAR(*finding.features[1].value / finding.features[0].value.value(), area_cm2,
              0.02 * area_cm2);  // a pixel of 0.1 mm along 160 mm of border
  ASSERT_EQ(finding.marks.size(), 1U);
  EXPECT_EQ(finding.marks[0].kind, MarkKind::kScar);
}

// Between a track that counts whole and none there are some that count in part: 0.1 to 0.9 is four
// fifths of the way from 6 to 7 sigmas, which a track of 15 mm, a tenth as strong as usual, has.
// Steps of a fiftieth are 0.14 of them.
TEST(ScarsMetric, AFadingTrackFadesFromTheCount) {
  const CouponDescription coupon = SquareCoupon();
  double count = 1;
  int partly = 0;
  for (double share = 1 / 5.0; share > 0.1; share *= 0.98) {
    Patch patch = GoodLines(9);
    DrawTrack({.path_mm = {{-8, -6}, {7, -2}}, .edge = -0.15 * share, .groove = 0.05 * share},
              patch);
    count = ScarsMetric().measure(MakeSurface(patch, coupon)).features[2].value.value();
    partly += count > 0.1 && count < 0.9 ? 1 : 0;
  }
  EXPECT_EQ(count, 0);
  EXPECT_GE(partly, 4);
}

TEST(ScarsMetric, SaysWhyAFailedCouponHasNone) {
  Patch patch = GoodLines(9);
  const Patch below = RenderLines({.pitch_mm = 0.42, .lay_deg = 135});
  const cv::Rect torn(300, 300, 200, 250);
  below.relative(torn).copyTo(patch.relative(torn));
  const CouponDescription coupon = SquareCoupon();
  const Finding finding = ScarsMetric().measure(MakeSurface(patch, coupon));
  for (const Feature& feature : finding.features) {
    EXPECT_FALSE(feature.value.has_value());
    EXPECT_NE(feature.reason.find("torn"), std::string::npos) << feature.reason;
  }
}

}  // namespace
}  // namespace laygauge
