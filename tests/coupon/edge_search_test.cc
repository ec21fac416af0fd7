#include "coupon/edge_search.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>

#include "coupon/edge_fit.h"

namespace laygauge {
namespace {

constexpr double kPxPerMm = 10;
constexpr int kSide_px = 601;
const cv::Point2d kOrigin_px{300, 300};
const WallView kFromAbove;  // no wall is seen

// How far inside the coupon's material a point of its frame lies, mm; negative: off it.
double Inside_mm(const CouponDescription& coupon, const cv::Point2d& at) {
  double inside_mm = 20 - std::max(std::abs(at.x), std::abs(at.y));  // the shipped square
  for (const Hole& hole : coupon.holes) {
    const double off_mm = std::hypot(at.x - hole.x_mm, at.y - hole.y_mm);
    inside_mm = std::min(inside_mm, off_mm - hole.diameter_mm / 2);
  }
  return inside_mm;
}

// The shipped coupon as seen from above: dark on light, edges 0.2 mm wide.
cv::Mat Draw(const CouponDescription& coupon, const Pose& pose) {
  cv::Mat picture(kSide_px, kSide_px, CV_32FC1);
  const Turn back(-pose.turn_deg);
  for (int y = 0; y < picture.rows; ++y) {
    for (int x = 0; x < picture.cols; ++x) {
      const cv::Point2d at_mm = (cv::Point2d(x, y) - kOrigin_px) / kPxPerMm - pose.center_mm;
      const double inside_mm = Inside_mm(coupon, back(at_mm));
      picture.at<float>(y, x) =
          static_cast<float>(1 - 0.6 * std::clamp(0.5 + inside_mm / 0.2, 0.0, 1.0));
    }
  }
  return picture;
}

PoseGrid NearGrid() {
  PoseGrid grid;
  grid.reach_mm = 0.7;
  grid.turn_reach_deg = 1;
  grid.turn_step_deg = 0.5;
  return grid;
}

TEST(SearchPoses, FindsTheQuarterByTheHoles) {
  const CouponDescription& coupon = ShippedCoupons().front();
  const Pose lies{{0.3, -0.4}, 180.5};
  const GradientPicture gradient = MakeGradient(Draw(coupon, lies), kPxPerMm, kOrigin_px, 1);
  PoseGrid grid = NearGrid();
  grid.same_outline_deg = {0, 90, 180, 270};
  const ScoredPose best = SearchPoses(gradient, CutEdges(coupon, 4, 0.3), kFromAbove, grid).front();
  EXPECT_NEAR(best.pose.turn_deg, lies.turn_deg, 1e-9);
  EXPECT_NEAR(best.pose.center_mm.x, lies.center_mm.x, 0.051);  // half a pixel
  EXPECT_NEAR(best.pose.center_mm.y, lies.center_mm.y, 0.051);
}

// A turned square has the same edges: the score that is found once is that of each quarter, but for
// the rounding of the edges' points to pixels, which moves single pieces' scores by a few percent.
TEST(SearchPoses, OneScoreOfTheOutlineServesAllQuarters) {
  const CouponDescription& coupon = ShippedCoupons().front();
  const GradientPicture gradient =
      MakeGradient(Draw(coupon, {{0.2, 0.1}, 0.5}), kPxPerMm, kOrigin_px, 1);
  const auto pieces = CutEdges(coupon, 4, 0.3);
  PoseGrid all = NearGrid();
  all.same_outline_deg = {0, 90, 180, 270};
  const auto together = SearchPoses(gradient, pieces, kFromAbove, all);
  for (const double quarter_deg : all.same_outline_deg) {
    PoseGrid one = NearGrid();
    one.middle.turn_deg = quarter_deg;
    const ScoredPose alone = SearchPoses(gradient, pieces, kFromAbove, one).front();
    const auto same = std::find_if(together.begin(), together.end(), [&](const ScoredPose& found) {
      return std::abs(found.pose.turn_deg - quarter_deg) < 45;
    });
    ASSERT_NE(same, together.end()) << quarter_deg;
    EXPECT_NEAR(same->score, alone.score, 0.01) << quarter_deg;
    EXPECT_NEAR(same->pose.turn_deg, alone.pose.turn_deg, 1e-9) << quarter_deg;
  }
}

TEST(FitEdges, FindsThePoseFromStartsNearby) {
  const CouponDescription& coupon = ShippedCoupons().front();
  const Pose lies{{0.31, -0.42}, 1.23};
  const cv::Mat picture = Draw(coupon, lies);
  const Pose near{lies.center_mm + cv::Point2d(0.1, -0.1), 1.0};
  const Pose off{lies.center_mm + cv::Point2d(0.25, 0.2), 1.0};
  for (const auto& starts : {std::vector{near, off}, std::vector{off, near}}) {
    const EdgeFit fit = FitEdges(picture, kPxPerMm, kOrigin_px, coupon, kFromAbove, starts);
    // Opposite sides' errors cancel: what is left is the drawing's resolution, 0.1 mm, over the
    // square root of the edges' 1600 pixels.
    EXPECT_NEAR(fit.pose.center_mm.x, lies.center_mm.x, 0.003);
    EXPECT_NEAR(fit.pose.center_mm.y, lies.center_mm.y, 0.003);
    EXPECT_NEAR(fit.pose.turn_deg, lies.turn_deg, 0.01);
    EXPECT_EQ(fit.outline_seen, 1);
    EXPECT_EQ(fit.holes_seen, 1);
  }
}

}  // namespace
}  // namespace laygauge
