#include "texture/blobs.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <limits>

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

std::vector<cv::Point2d> FindOn(const Patch& patch) {
  const TopView view = MakeTopView(patch, 45, FindTornArea(patch, 45.0));
  std::vector<cv::Point2d> centres;
  for (const Blob& blob : FindBlobs(view, FindTracks(view))) {
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

// An exponential tail leaves 0.5 exp(-3.7 ln 5) of about 220 local maxima of a coupon (its searched
// area over the separation's square, less a half) above min_excess: 0.3, six on twenty coupons;
// Poisson's law exceeds twelve in 1 %.
TEST(Blobs, HardlyAnyOnTwentyGoodCoupons) {
  size_t blobs = 0;
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    blobs += FindOn(GoodLines(seed)).size();
  }
  EXPECT_LE(blobs, 12U);
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
  const TopView view = MakeTopView(patch, 45, FindTornArea(patch, 45.0));
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
  // Five plain ones count whole. An exponential tail of 110 exp(-1.609 e) local maxima above excess
  // e, each counting by its chance down to two units below the limit, adds 0.7 in the mean.
  const double count = finding.features[0].value.value() * surface.top.searched_cm2;
  EXPECT_GT(count, 4.9);
  EXPECT_LT(count, 7);
  EXPECT_EQ(finding.marks.size(), 5U);
  // Each takes between the disk of its own 0.3 mm and that of the separation, 1.8 mm.
  const double area_mm2 = finding.features[1].value.value() * surface.top.searched_cm2 / 5;
  EXPECT_GT(area_mm2, 0.28);
  EXPECT_LT(area_mm2, 10.2);
}

}  // namespace
}  // namespace laygauge
