#include "coupon/regions.h"

#include <gtest/gtest.h>

#include <cmath>

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

TEST(Regions, OptionsAreChecked) {
  EXPECT_NO_THROW(RegionOptions().Check());
  EXPECT_THROW(RegionOptions{.px_per_mm = 0}.Check(), BadOption);
  EXPECT_THROW(RegionOptions{.field_from_outline_mm = -1}.Check(), BadOption);
}

}  // namespace
}  // namespace laygauge
