#include "texture/contour.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <numbers>

#include "support/render_lines.h"

namespace laygauge {
namespace {

TEST(Contour, CoversTheOutlineWithoutItsCornersAndEveryHole) {
  const auto contours = SampleContours(SquareCoupon(), 0.25, 0.9, 2);
  ASSERT_EQ(contours.size(), 6U);  // four edges, two holes
  for (std::size_t i = 0; i < 4; ++i) {
    // 40 mm less two corners of 2 mm: 144 steps
    EXPECT_FALSE(contours[i].closed);
    EXPECT_EQ(contours[i].points.size(), 145U);
  }
  const double length = static_cast<double>(contours[4].points.size()) * contours[4].step_mm;
  EXPECT_NEAR(length, 2 * std::numbers::pi * 3.9, 1e-9);  // at the seam, 0.9 mm inside
}

TEST(Contour, PointsIntoTheMaterialWhicheverWayTheOutlineRuns) {
  CouponDescription coupon = SquareCoupon();
  for (int turn = 0; turn < 2; ++turn) {
    for (const Contour& contour : SampleContours(coupon, 0.5, 0.9, 2)) {
      for (const ContourPoint& at : contour.points) {
        const cv::Point2d inside = at.point_mm + 0.5 * at.inward;
        EXPECT_NEAR(cv::norm(at.inward), 1, 1e-12);
        EXPECT_LT(std::max(std::abs(inside.x), std::abs(inside.y)), 20);
        for (const Hole& hole : coupon.holes) {
          EXPECT_GT(std::hypot(inside.x - hole.x_mm, inside.y - hole.y_mm), hole.diameter_mm / 2);
        }
      }
    }
    std::reverse(coupon.outline_mm.begin(), coupon.outline_mm.end());
  }
}

// A plane is reproduced exactly by bilinear interpolation (definition).
TEST(SampleBilinear, IsExactOnAPlaneAndNothingOutside) {
  cv::Mat plane(5, 6, CV_32FC1);
  for (int y = 0; y < 5; ++y) {
    for (int x = 0; x < 6; ++x) {
      plane.at<float>(y, x) = static_cast<float>(1 + 2 * x - 3 * y);
    }
  }
  // values below 20 in float: 1e-6 of them
  EXPECT_NEAR(SampleBilinear(plane, {2.25, 3.5}), 1 + 4.5 - 10.5, 2e-5);
  EXPECT_NEAR(SampleBilinear(plane, {0, 0}), 1, 2e-5);
  EXPECT_TRUE(std::isnan(SampleBilinear(plane, {-0.01, 2})));
  EXPECT_TRUE(std::isnan(SampleBilinear(plane, {2, 4.01})));
}

}  // namespace
}  // namespace laygauge
