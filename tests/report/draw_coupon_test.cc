#include "report/draw_coupon.h"

#include <gtest/gtest.h>

#include <cmath>

#include "support/render_lines.h"

namespace laygauge {
namespace {

Patch EvenPatch() {
  Patch patch;
  patch.px_per_mm = 10;
  patch.relative = cv::Mat(440, 440, CV_32FC1, cv::Scalar(1));
  patch.regions = SquareCouponRegions(10, 44);
  patch.origin_px = {219.5, 219.5};
  patch.level = 0.4;
  return patch;
}

// 0.30 of full light by IEC 61966-2-1: 255 * (1.055 * 0.30^(1 / 2.4) - 0.055).
const double kOwnLevelGray = 255 * (1.055 * std::pow(0.30, 1 / 2.4) - 0.055);

TEST(PictureOfPatch, ShowsTheCouponsOwnLevelAlikeForEveryFilament) {
  Patch patch = EvenPatch();
  patch.relative.at<float>(0, 1) = 0;
  patch.relative.at<float>(0, 2) = 10;     // brighter than can be shown
  patch.relative.at<float>(0, 3) = -0.1F;  // as a noisy black can come out
  patch.relative.at<float>(0, 4) = 0.5F;
  for (const double level : {0.05, 0.9}) {
    patch.level = level;
    const cv::Mat picture = PictureOfPatch(patch);
    ASSERT_EQ(picture.type(), CV_8UC1);
    ASSERT_EQ(picture.size(), patch.relative.size());
    EXPECT_NEAR(picture.at<uchar>(0, 0), kOwnLevelGray, 1);  // one step of gray: rounding
    EXPECT_EQ(picture.at<uchar>(0, 1), 0);
    EXPECT_EQ(picture.at<uchar>(0, 2), 255);
    EXPECT_EQ(picture.at<uchar>(0, 3), 0);
    EXPECT_NEAR(picture.at<uchar>(0, 4), 255 * (1.055 * std::pow(0.15, 1 / 2.4) - 0.055), 1);
  }
}

TEST(PictureToJudge, HidesWhatIsAroundTheCouponAndNothingElse) {
  Patch patch = EvenPatch();
  const cv::Mat whole = PictureOfPatch(patch);
  const cv::Mat seen = PictureToJudge(patch);
  const auto gray = [&](cv::Point2d point_mm) {
    const cv::Point2d at = patch.PixelFromCoupon(point_mm);
    return static_cast<int>(seen.at<uchar>(cvRound(at.y), cvRound(at.x)));
  };
  const int own = whole.at<uchar>(0, 0);
  const int around = seen.at<uchar>(0, 0);
  EXPECT_NE(around, own);
  // SquareCoupon ends at 20 mm; its hole at (9, -9) stays as it is.
  for (const cv::Point2d on : {cv::Point2d(0, 0), {9, -9}, {19.8, 19.8}, {-20.1, 0}}) {
    EXPECT_EQ(gray(on), own) << on;
  }
  for (const cv::Point2d off : {cv::Point2d(-20.8, 0), {20.8, 20.8}, {0, 21.5}, {-21, -21}}) {
    EXPECT_EQ(gray(off), around) << off;
  }
}

TEST(PictureOfFindings, AddsALineForEachCaptionAndOneForTheLegend) {
  const Patch patch = EvenPatch();
  const CouponDescription coupon = SquareCoupon();
  const cv::Mat none = PictureOfFindings(patch, coupon, {}, {});
  const cv::Mat two = PictureOfFindings(patch, coupon, {}, {"batch b1", "score 7"});
  ASSERT_EQ(none.type(), CV_8UC4);
  EXPECT_EQ(none.cols, 440);
  EXPECT_GT(none.rows, 440 + 12);  // a legend's line is taller than its swatches, 12 px
  EXPECT_EQ((two.rows - none.rows) % 2, 0);
  EXPECT_GT((two.rows - none.rows) / 2, 15);  // than the letters, 15 px
}

// Red, green and blue of a pixel at a place on the coupon.
cv::Vec3d ColourAt(const cv::Mat& picture, const Patch& patch, cv::Point2d point_mm) {
  const cv::Point2d at = patch.PixelFromCoupon(point_mm);
  const auto pixel = picture.at<cv::Vec4b>(cvRound(at.y), cvRound(at.x));
  return {static_cast<double>(pixel[2]), static_cast<double>(pixel[1]),
          static_cast<double>(pixel[0])};
}

TEST(PictureOfFindings, DrawsEachMarkWhereItIsInItsColour) {
  const Patch patch = EvenPatch();
  const CouponDescription coupon = SquareCoupon();
  std::vector<cv::Vec3d> colours;
  for (const MarkKind kind : {MarkKind::kGap, MarkKind::kRidge, MarkKind::kScar, MarkKind::kBlob,
                              MarkKind::kWallGap, MarkKind::kFailure}) {
    // A bar 1 mm wide, 4 mm right of the origin and 3 mm below it, 5 mm long.
    const Mark mark{kind, {{4, 3}, {9, 3}}, false, 1.0};
    const cv::Mat picture = PictureOfFindings(patch, coupon, {mark}, {});
    const auto off_gray = [&](cv::Point2d at) {
      return cv::norm(ColourAt(picture, patch, at) - cv::Vec3d::all(kOwnLevelGray));
    };
    // A fine line along it; beside it, as far as the bar reaches, a veil of a fifth of the ink:
    // seen (8 steps), but the surface shows through it (less than half of the line).
    for (const cv::Point2d on : {cv::Point2d(4.1, 3), {6.5, 3}, {8.9, 3}}) {
      EXPECT_GT(off_gray(on), 40) << on;
    }
    for (const cv::Point2d beside : {cv::Point2d(6.5, 2.7), {6.5, 3.3}}) {
      EXPECT_GT(off_gray(beside), 8) << beside;
      EXPECT_LT(off_gray(beside), off_gray({6.5, 3}) / 2) << beside;
    }
    for (const cv::Point2d off : {cv::Point2d(6.5, 2.2), {6.5, 3.8}, {3, 3}, {10, 3}, {6.5, -3}}) {
      EXPECT_LE(off_gray(off), 2) << off;
    }
    colours.push_back(ColourAt(picture, patch, {6.5, 3}));
  }
  // Any two are told apart: 40 of 255 steps is far more than an eye needs on a plain ground.
  for (size_t i = 0; i < colours.size(); ++i) {
    for (size_t k = 0; k < i; ++k) EXPECT_GT(cv::norm(colours[i] - colours[k]), 40) << i << k;
  }
}

TEST(PictureOfFindings, LeavesTheSurfaceVisibleInsideAnArea) {
  const Patch patch = EvenPatch();
  const Mark area{MarkKind::kFailure, {{-5, -5}, {5, -5}, {5, 5}, {-5, 5}}, true, 0};
  const cv::Mat picture = PictureOfFindings(patch, SquareCoupon(), {area}, {});
  const double inside = cv::norm(ColourAt(picture, patch, {0, 0}) - cv::Vec3d::all(kOwnLevelGray));
  const double border = cv::norm(ColourAt(picture, patch, {-5, 0}) - cv::Vec3d::all(kOwnLevelGray));
  EXPECT_GT(inside, 2);  // tinted
  EXPECT_LT(inside, border / 2);
}

TEST(PictureOfFindings, DrawsOutlineAndHoles) {
  const Patch patch = EvenPatch();
  const cv::Mat picture = PictureOfFindings(patch, SquareCoupon(), {}, {});
  // The left edge, 20 mm from the origin; the hole of 6 mm at (9, -9).
  for (const cv::Point2d on : {cv::Point2d(-20, 0), {9, -12}, {12, -9}}) {
    double strongest = 0;  // lines are 1.2 px wide: within a pixel of the place
    for (int dy = -1; dy <= 1; ++dy) {
      for (int dx = -1; dx <= 1; ++dx) {
        const cv::Vec3d colour = ColourAt(picture, patch, on + cv::Point2d(dx, dy) / 10);
        strongest = std::max(strongest, cv::norm(colour - cv::Vec3d::all(kOwnLevelGray)));
      }
    }
    EXPECT_GT(strongest, 40) << on;
  }
}

}  // namespace
}  // namespace laygauge
