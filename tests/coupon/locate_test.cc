#include "coupon/locate.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>

#include "base/error.h"
#include "coupon/render_scene.h"

namespace laygauge {
namespace {

using ::testing::HasSubstr;

constexpr double kCenterTolerance_mm = 0.06;  // a photo's pixel is 0.07 mm
constexpr double kTurnTolerance_deg = 0.1;    // moves a corner by 0.05 mm

CouponDescription WithOutline(std::vector<cv::Point2d> outline) {
  CouponDescription coupon;
  coupon.name = "made-up";
  coupon.outline_mm = std::move(outline);
  coupon.thickness_mm = 2.5;
  coupon.layer_height_mm = 0.2;
  coupon.wall_mm = 0.9;
  return coupon;
}

Scene SquareScene() {
  Scene scene;
  scene.coupon = ShippedCoupons()[0];
  scene.center_mm = {54.2, 46.7};
  scene.turn_deg = 2.6;
  scene.shadow_mm = {2.0, 0.7};
  return scene;
}

WellFinding Locate(const Scene& scene, const CouponDescription& coupon,
                   const CameraSetup& setup = {}) {
  const View view = MakeView(setup);
  const Photo photo = RenderScene(scene, view);
  SheetDescription sheet;
  sheet.well_floor_reflectance = scene.floor_reflectance;
  const Well well{"A1", 53, 48, 46, 46};
  return LocateCoupon(photo, view, EvenLight(scene.paper), sheet, well, coupon, {});
}

void ExpectFound(const Scene& scene, const std::string& what, double turned_deg = 0) {
  const WellFinding finding = Locate(scene, scene.coupon);
  ASSERT_EQ(finding.state, WellState::kCoupon) << what << ": " << finding.reason;
  EXPECT_NEAR(finding.placement->center_x_mm, scene.center_mm.x, kCenterTolerance_mm) << what;
  EXPECT_NEAR(finding.placement->center_y_mm, scene.center_mm.y, kCenterTolerance_mm) << what;
  EXPECT_NEAR(std::remainder(finding.placement->turn_deg - scene.turn_deg, 360), turned_deg,
              kTurnTolerance_deg)
      << what;
}

TEST(Locate, FindsAllFilaments) {
  for (const double reflectance : {0.04, 0.2, 0.4, 0.9, 1.05}) {
    Scene scene = SquareScene();
    scene.reflectance = reflectance;
    scene.wall_reflectance = 0.8 * reflectance;
    ExpectFound(scene, "reflectance " + std::to_string(reflectance));
  }
}

TEST(Locate, IsNotMisledByLinesAlongTheOutline) {
  for (const double lay_deg : {0.0, 90.0}) {
    for (const double pitch_mm : {0.35, 0.5, 0.8}) {
      Scene scene = SquareScene();
      scene.line_lay_deg = lay_deg;
      scene.line_pitch_mm = pitch_mm;
      scene.line_depth = 0.5;
      ExpectFound(scene, "lay " + std::to_string(lay_deg) + " pitch " + std::to_string(pitch_mm));
    }
  }
}

TEST(Locate, IsNotMisledByShadows) {
  for (const double angle_deg : {0.0, 90.0, 180.0, 270.0}) {
    Scene scene = SquareScene();
    scene.reflectance = 0.85;
    scene.wall_reflectance = 0.6;
    scene.shadow_depth = 0.4;
    scene.shadow_mm = {2.2 * std::cos(angle_deg * CV_PI / 180),
                       2.2 * std::sin(angle_deg * CV_PI / 180)};
    ExpectFound(scene, "shadow towards " + std::to_string(angle_deg));
  }
}

// The wall on the camera's side shows 0.33 mm wide and is as bright as the top: its foot is the
// only edge there.
TEST(Locate, ToldByTheFootOfAVisibleWall) {
  Scene scene = SquareScene();
  scene.reflectance = 0.05;
  scene.wall_reflectance = 0.05;
  scene.line_depth = 0;
  scene.shadow_mm = {0, 0};
  ExpectFound(scene, "black on black");
}

TEST(Locate, ReachesAllPlacesThatHandsLeaveIt) {
  for (const double turn_deg : {-7.0, 0.0, 7.0}) {
    for (const cv::Point2d offset_mm : {cv::Point2d(3.5, -3.5), cv::Point2d(-3.5, 3.5)}) {
      Scene scene = SquareScene();
      scene.turn_deg = turn_deg;
      scene.center_mm = cv::Point2d(53, 48) + offset_mm;
      ExpectFound(scene, "turn " + std::to_string(turn_deg));
    }
  }
}

TEST(Locate, NotesAQuarterTurn) {
  Scene scene = SquareScene();
  for (const double turn_deg : {92.0, 178.5, -88.0}) {
    scene.turn_deg = turn_deg;
    ExpectFound(scene, "turn " + std::to_string(turn_deg));
    EXPECT_THAT(Locate(scene, scene.coupon).reason, HasSubstr("lies turned by"));
  }
}

TEST(Locate, OtherOutlinesAndNoHoles) {
  Scene scene = SquareScene();
  scene.coupon = WithOutline({{-20, -20}, {20, -20}, {20, 20}, {-20, 20}});
  ExpectFound(scene, "square without holes");
  scene.coupon = WithOutline({{-20, -20}, {20, -20}, {20, 0}, {0, 0}, {0, 20}, {-20, 20}});
  ExpectFound(scene, "L");
  scene.coupon = WithOutline({{-20, 17}, {0, -17}, {20, 17}});
  ExpectFound(scene, "triangle");
  scene.turn_deg = 91;
  ExpectFound(scene, "triangle on its side");
}

TEST(Locate, ADarkWellFloorServesWhiteCoupons) {
  Scene scene = SquareScene();
  scene.reflectance = 0.9;
  scene.floor_reflectance = 0.36;
  ExpectFound(scene, "gray floor");
}

TEST(Locate, AnEmptyWellIsEmpty) {
  Scene scene = SquareScene();
  scene.coupon_lies_there = false;
  for (const double floor : {1.0, 0.36}) {
    scene.floor_reflectance = floor;
    const WellFinding finding = Locate(scene, scene.coupon);
    EXPECT_EQ(finding.state, WellState::kEmpty) << finding.reason;
    EXPECT_FALSE(finding.placement);
  }
}

TEST(Locate, RefusesWhatIsNotTheCoupon) {
  Scene scene = SquareScene();
  CouponDescription drawing = scene.coupon;
  for (Hole& hole : drawing.holes) hole.x_mm = -hole.x_mm;
  WellFinding finding = Locate(scene, drawing);
  EXPECT_EQ(finding.state, WellState::kUnclear);
  EXPECT_THAT(finding.reason, HasSubstr("A1: the outline of a coupon was found, but its holes"));

  scene.coupon = WithOutline({{-12, -12}, {12, -12}, {12, 12}, {-12, 12}});
  finding = Locate(scene, drawing);
  EXPECT_EQ(finding.state, WellState::kUnclear);
  EXPECT_THAT(finding.reason, HasSubstr("A1: something lies here"));
}

TEST(Locate, RefusesWhatIsPartlyOutsideThePhoto) {
  CameraSetup setup;
  setup.looks_at_mm = {53 + 19, 48};  // the photo's left edge cuts the coupon
  setup.size_px = {550, 850};
  const Scene scene = SquareScene();
  const WellFinding finding = Locate(scene, scene.coupon, setup);
  EXPECT_EQ(finding.state, WellState::kUnclear);
  EXPECT_THAT(finding.reason, HasSubstr("photo"));
}

TEST(Locate, OptionsAreChecked) {
  EXPECT_NO_THROW(LocateOptions().Check());
  EXPECT_THROW(LocateOptions{.reach_mm = 0}.Check(), BadOption);
  EXPECT_THROW(LocateOptions{.turn_reach_deg = 60}.Check(), BadOption);
}

}  // namespace
}  // namespace laygauge
