#include "coupon/regions.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <opencv2/imgproc.hpp>
#include <vector>

#include "base/error.h"

namespace laygauge {
namespace {

constexpr double kPi = 3.14159265358979;

CouponDescription Coupon(std::vector<cv::Point2d> outline, std::vector<Hole> holes) {
  CouponDescription coupon;
  coupon.outline_mm = std::move(outline);
  coupon.holes = std::move(holes);
  coupon.wall_mm = 0.9;
  return coupon;
}

CouponDescription Square40() {
  return Coupon({{-20, -20}, {20, -20}, {20, 20}, {-20, 20}}, {{9, -9, 6}, {-10, 8, 3.2}});
}

double Area_mm2(const CouponRegions& regions, Region region) {
  return cv::countNonZero(regions.regions == static_cast<int>(region)) /
         (regions.px_per_mm * regions.px_per_mm);
}

Region At(const CouponRegions& regions, double x_mm, double y_mm) {
  const cv::Point2d pixel = cv::Point2d(x_mm, y_mm) * regions.px_per_mm + regions.origin_px;
  return static_cast<Region>(regions.regions.at<std::uint8_t>(
      static_cast<int>(std::lround(pixel.y)), static_cast<int>(std::lround(pixel.x))));
}

// A pixel is counted whole or not, by its centre: along a straight edge that may err by up to half
// a pixel, 0.025 mm, times its length (at most 160 mm here); along curves it averages out.
constexpr double kAreaTolerance_mm2 = 4;

TEST(Regions, AreasOfTheSquareAreThoseOfGeometry) {
  const CouponRegions regions = MakeRegions(Square40(), {});
  EXPECT_EQ(regions.regions.size(), cv::Size(880, 880));
  EXPECT_EQ(regions.origin_px, cv::Point2d(439.5, 439.5));
  const double field = 34.0 * 34 - kPi * (5.0 * 5 + 3.6 * 3.6);
  const double wall = 40.0 * 40 - 38.2 * 38.2 + kPi * (3.9 * 3.9 - 3 * 3 + 2.5 * 2.5 - 1.6 * 1.6);
  const double whole = 1600 - kPi * (3 * 3 + 1.6 * 1.6);
  EXPECT_NEAR(Area_mm2(regions, Region::kField), field, kAreaTolerance_mm2);
  EXPECT_NEAR(Area_mm2(regions, Region::kWall), wall, kAreaTolerance_mm2);
  EXPECT_NEAR(Area_mm2(regions, Region::kMargin), whole - field - wall, kAreaTolerance_mm2);
  EXPECT_NEAR(Area_mm2(regions, Region::kOff), 44 * 44 - whole, kAreaTolerance_mm2);
  EXPECT_EQ(regions.field_pixels, cv::countNonZero(regions.regions == 3));
}

TEST(Regions, FollowTheDrawingsAxes) {
  const CouponRegions regions = MakeRegions(Square40(), {});
  EXPECT_EQ(At(regions, 9, -9), Region::kOff);  // x right, y down: the upper right hole
  EXPECT_EQ(At(regions, 9, 9), Region::kField);
  EXPECT_EQ(At(regions, -10, 8 + 1.6 + 0.5), Region::kWall);
  EXPECT_EQ(At(regions, -10, 8 + 1.6 + 1.5), Region::kMargin);
  EXPECT_EQ(At(regions, -10, 8 + 1.6 + 2.2), Region::kField);
  EXPECT_EQ(At(regions, 20.5, 0), Region::kOff);
  EXPECT_EQ(At(regions, 19.5, 0), Region::kWall);
  EXPECT_EQ(At(regions, 18, 0), Region::kMargin);
  EXPECT_EQ(At(regions, 16.9, 0), Region::kField);
}

TEST(Regions, AnAngledOutlineIsCutWhereItIs) {
  // An L, corners listed the other way round.
  const CouponRegions regions =
      MakeRegions(Coupon({{-20, 20}, {0, 20}, {0, 0}, {20, 0}, {20, -20}, {-20, -20}}, {}), {});
  EXPECT_EQ(At(regions, 10, 10), Region::kOff);
  EXPECT_EQ(At(regions, -10, 10), Region::kField);
  EXPECT_EQ(At(regions, -2, 10), Region::kMargin);
  EXPECT_EQ(At(regions, -0.5, -0.5), Region::kWall);  // 0.71 mm from the inner corner
  EXPECT_EQ(At(regions, -1.5, -1.5), Region::kMargin);
  // All but 3 mm along the sides; in the square at the inner corner a quarter circle is off.
  const double field = 34.0 * 14 + 14.0 * 20 + 9 - kPi * 9 / 4;
  EXPECT_NEAR(Area_mm2(regions, Region::kField), field, kAreaTolerance_mm2);
}

// What the pixel's centre, at `at_mm`, belongs to by OpenCV's distance from a polygon; `slack_mm`
// is how far it is from belonging to another region.
Region ByDistance(const CouponDescription& coupon, const cv::Point2f& at_mm, double& slack_mm) {
  const std::vector<cv::Point2f> outline(coupon.outline_mm.begin(), coupon.outline_mm.end());
  const double inside_mm = cv::pointPolygonTest(outline, at_mm, true);
  double hole_mm = 1e6;
  for (const Hole& hole : coupon.holes) {
    hole_mm = std::min(hole_mm,
                       std::hypot(at_mm.x - hole.x_mm, at_mm.y - hole.y_mm) - hole.diameter_mm / 2);
  }
  slack_mm =
      std::min({std::abs(inside_mm), std::abs(inside_mm - coupon.wall_mm), std::abs(inside_mm - 3),
                std::abs(hole_mm), std::abs(hole_mm - coupon.wall_mm), std::abs(hole_mm - 2)});
  if (inside_mm < 0 || hole_mm < 0) return Region::kOff;
  if (inside_mm < coupon.wall_mm || hole_mm < coupon.wall_mm) return Region::kWall;
  return inside_mm < 3 || hole_mm < 2 ? Region::kMargin : Region::kField;
}

TEST(Regions, AgreeWithDistancesPixelByPixel) {
  const std::vector<Hole> holes = {{-8, 9, 6}, {-9, -9, 3.2}};
  const std::vector<std::vector<cv::Point2d>> outlines = {
      {{-20, 17}, {0, -17}, {20, 17}},
      {{-20, 20}, {0, 20}, {0, 0}, {20, 0}, {20, -20}, {-20, -20}},
      {{-19, -3}, {2, -18}, {20, -14}, {3, 1}, {17, 16}, {-14, 19}}};
  for (const auto& outline : outlines) {
    const CouponDescription coupon = Coupon(outline, holes);
    const CouponRegions regions = MakeRegions(coupon, {.px_per_mm = 7.3});
    for (int y = 0; y < regions.regions.rows; ++y) {
      for (int x = 0; x < regions.regions.cols; ++x) {
        const cv::Point2d at_mm = (cv::Point2d(x, y) - regions.origin_px) / regions.px_per_mm;
        double slack_mm = 0;
        const Region expected = ByDistance(coupon, at_mm, slack_mm);
        if (slack_mm < 1e-4) continue;  // the reference's single precision
        ASSERT_EQ(regions.regions.at<std::uint8_t>(y, x), static_cast<int>(expected))
            << at_mm << " of an outline of " << outline.size() << " corners";
      }
    }
  }
}

TEST(Regions, OptionsAreChecked) {
  EXPECT_NO_THROW(RegionOptions().Check());
  EXPECT_THROW(RegionOptions{.px_per_mm = 0}.Check(), BadOption);
  EXPECT_THROW(RegionOptions{.field_from_outline_mm = -1}.Check(), BadOption);
}

}  // namespace
}  // namespace laygauge
