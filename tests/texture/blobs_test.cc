#include "texture/blobs.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <limits>
#include <utility>

#include "base/error.h"
#include "support/draw_defects.h"
#include "support/render_lines.h"
#include "texture/blobs_metric.h"

namespace laygauge {
namespace {

Patch GoodLines(std::uint64_t seed) {
  Patch patch = RenderLines({.pitch_mm = 0.42,
                             .lay_deg = 45,
                             .first = 0.1,
                             .second = 0.03,
                             .wander_mm = 0.02,
                             .noise_sd = 0.02,
                             .blur_sd_mm = 0.05,
                             .seed = seed});
  DrawChannels(40, 0.42, 45, seed, patch);
  return patch;
}

// Excess at which a lump counts a half, as drawn in overlays.
constexpr double kHalf = 4.6;

std::vector<cv::Point2d> FindOn(const Patch& patch) {
  const TopView view =
      MakeTopView(ReducedPatch(patch), 45, FindTornArea(ReducedPatch(patch), 45.0));
  std::vector<cv::Point2d> centres;
  for (const Blob& blob : FindBlobs(view, FindTracks(view))) {
    if (blob.excess < kHalf) continue;
    centres.push_back(view.CouponPoint(blob.centre_px));
  }
  return centres;
}

const std::vector<cv::Point2d> kPlaces{{-12, -12}, {1, 3}, {11, 8}, {-3, 14}, {-9, -2}};

void ExpectOneAtEach(const std::vector<cv::Point2d>& found, const char* what) {
  EXPECT_EQ(found.size(), kPlaces.size()) << what;
  for (const cv::Point2d& place : kPlaces) {
    const auto near = std::count_if(found.begin(), found.end(), [place](cv::Point2d p) {
      return cv::norm(p - place) < 0.8;  // the brighter or darker side of a lump of 0.3 mm
    });
    EXPECT_EQ(near, 1) << what << " " << place;
  }
}

TEST(Blobs, FoundWhereTheyAreWhereverTheLightComesFrom) {
  for (const double light : {0.0, 45.0, 90.0, 135.0, 180.0, 300.0}) {
    Patch patch = GoodLines(3);
    for (const cv::Point2d& place : kPlaces) {
      DrawBlob({.centre_mm = place, .light_deg = light, .lit = 0.2}, patch);
    }
    ExpectOneAtEach(FindOn(patch), std::to_string(light).c_str());
  }
}

TEST(Blobs, FoundUnderLightFromAllSidesIfTheyShine) {
  Patch patch = GoodLines(4);
  for (const cv::Point2d& place : kPlaces) {
    DrawBlob({.centre_mm = place, .lit = 0, .shine = 0.5}, patch);
  }
  ExpectOneAtEach(FindOn(patch), "shine");
}

// What two lamps from opposite sides leave of a small lump, all the darkness of open channels
// about.
TEST(Blobs, SmallOnesAreFoundAmongOpenChannels) {
  Patch patch = GoodLines(11);
  DrawChannels(400, 0.42, 45, 11, patch);
  for (const cv::Point2d& place : kPlaces) {
    DrawBlob({.centre_mm = place, .radius_mm = 0.15, .lit = 0.015, .shine = 0.3}, patch);
  }
  ExpectOneAtEach(FindOn(patch), "small");
}

// 25 of about 185 local maxima: more than a tenth, by which the surface's own heights are judged.
TEST(Blobs, ManyDoNotHideEachOther) {
  Patch patch = GoodLines(12);
  for (int i = 0; i < 25; ++i) {
    const cv::Point2d centre_mm(-14 + 7.0 * (i % 5), -14 + 7.0 * (i / 5));
    DrawBlob({.centre_mm = centre_mm, .lit = 0.2}, patch);
  }
  // Four lie in the holes or beside their walls.
  EXPECT_GE(FindOn(patch).size(), 21U);
}

// An exponential tail leaves 0.5 exp(-4.6 ln 5) of about 185 local maxima of a coupon above 4.6:
// 0.06, one on twenty coupons; Poisson's law exceeds four in 1 %.
TEST(Blobs, HardlyAnyOnTwentyGoodCoupons) {
  size_t blobs = 0;
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    blobs += FindOn(GoodLines(seed)).size();
  }
  EXPECT_LE(blobs, 4U);
}

// Open in pieces of 1.5 mm, from the walls' inner side on. Without the rim of 0.6 mm each is found.
TEST(Blobs, AnOpenSeamIsNone) {
  for (const double width_mm : {0.3, 0.5}) {
    Patch patch = GoodLines(14);
    for (double y_mm = -16; y_mm < 16; y_mm += 4) {
      const cv::Point2d corner = patch.PixelFromCoupon({-18.7, y_mm});
      const cv::Rect open(cvRound(corner.x), cvRound(corner.y), cvRound(width_mm * 20), 30);
      patch.relative(open).setTo(0.2);
    }
    const TopView view =
        MakeTopView(ReducedPatch(patch), 45, FindTornArea(ReducedPatch(patch), 45.0));
    EXPECT_TRUE(FindBlobs(view, {}).empty()) << width_mm;
  }
}

TEST(Blobs, AScarIsNone) {
  Patch patch = GoodLines(5);
  DrawTrack({.path_mm = {{-6, -12}, {5, 6}}, .edge = 0.3, .groove = -0.2}, patch);
  EXPECT_TRUE(FindOn(patch).empty());
}

TEST(Blobs, WhatLiesOffTheCouponIsNotRead) {
  Patch patch = GoodLines(6);
  for (const cv::Point2d& place : kPlaces) {
    DrawBlob({.centre_mm = place, .lit = 0.2}, patch);
  }
  const auto before = FindOn(patch);
  patch.relative.setTo(std::numeric_limits<float>::quiet_NaN(),
                       patch.regions == static_cast<int>(Region::kOff));
  EXPECT_EQ(FindOn(patch), before);
}

TEST(Blobs, TheViewIsNotChanged) {
  const Patch patch = GoodLines(7);
  const TopView view =
      MakeTopView(ReducedPatch(patch), 45, FindTornArea(ReducedPatch(patch), 45.0));
  const cv::Mat before = view.relative.clone();
  (void)FindBlobs(view, {});
  EXPECT_EQ(cv::norm(view.relative, before, cv::NORM_INF), 0);
}

TEST(Blobs, OptionsAreChecked) {
  EXPECT_NO_THROW(BlobOptions{}.Check());
  BlobOptions bad;
  bad.separation_mm = 0;
  EXPECT_THROW(bad.Check(), BadOption);
}

TEST(BlobsMetric, CountsByAreaAndMarks) {
  Patch patch = GoodLines(8);
  for (const cv::Point2d& place : kPlaces) {
    DrawBlob({.centre_mm = place, .lit = 0.2}, patch);
  }
  const CouponDescription coupon = SquareCoupon();
  const Metric metric = BlobsMetric();
  const Surface surface = MakeSurface(patch, coupon);
  const Finding finding = metric.measure(surface);
  ASSERT_EQ(finding.features.size(), metric.features.size());
  // Five plain ones count whole. An exponential tail of 92 exp(-1.609 e) local maxima above excess
  // e, each counting by its chance between 3.8 and 5.4, adds 0.07 in the mean; one whole is left
  // out.
  const double count = finding.features[0].value.value() * surface.top.searched_cm2;
  EXPECT_GT(count, 4.99);
  EXPECT_LT(count, 6);
  EXPECT_EQ(finding.marks.size(), 5U);
  // Each takes between the disk of its own 0.3 mm and that of the separation, 1.8 mm.
  const double area_mm2 = finding.features[1].value.value() * surface.top.searched_cm2 / 5;
  EXPECT_GT(area_mm2, 0.28);
  EXPECT_LT(area_mm2, 10.2);
}

// Blobs per cm2 and area in per cent of a coupon with five lumps of this strength.
std::pair<double, double> Measured(double lit) {
  Patch patch = GoodLines(10);
  for (const cv::Point2d& place : kPlaces) {
    DrawBlob({.centre_mm = place, .lit = lit}, patch);
  }
  const CouponDescription coupon = SquareCoupon();
  const Finding finding = BlobsMetric().measure(MakeSurface(patch, coupon));
  return {finding.features[0].value.value(), finding.features[1].value.value()};
}

// Excess goes with strength, so that a lump leaves the count (from 5.4 to 3.8) while it fades by
// 30 %: a step of 2 % takes 0.07 of each of five, 0.35; as much again where the
// surface's own heights, by which excess counts, change.
TEST(BlobsMetric, FadingLumpsFadeFromTheCount) {
  const double area_cm2 = MakeTopView(ReducedPatch(GoodLines(10)), 45, {}).searched_cm2;
  double last = Measured(0.12).first * area_cm2;
  EXPECT_GT(last, 4.9);
  for (double lit = 0.12; lit > 0.02; lit *= 0.98) {
    const double count = Measured(lit).first * area_cm2;
    EXPECT_NEAR(count, last, 0.8) << lit;
    last = count;
  }
  EXPECT_LT(last, 0.5);
}

// Both excesses grow alike with the contrast; noise and lines below move their sum by a fifth at
// most.
TEST(BlobsMetric, AreaDoesNotFollowContrast) {
  const double weak = Measured(0.2).second;
  EXPECT_NEAR(Measured(0.4).second, weak, 0.2 * weak);
}

}  // namespace
}  // namespace laygauge
