#include "coupon/light.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>

#include "coupon/render_scene.h"

namespace laygauge {
namespace {

using ::testing::HasSubstr;
using ::testing::IsEmpty;

const SheetDescription& A5() {
  for (const SheetDescription& sheet : ShippedSheets()) {
    if (sheet.name == "a5-6") return sheet;
  }
  throw std::logic_error("a5-6 is not shipped");
}

// The whole A5 sheet at 5 px/mm.
View WholeSheet() {
  CameraSetup setup;
  setup.size_px = {1150, 850};
  setup.looks_at_mm = {105, 74};
  setup.px_per_mm = 5;
  return MakeView(setup);
}

// A lamp at the left and vignetting by the fourth power of the cosine (common knowledge).
double TrueLight(const cv::Point2d& p) {
  const double lamp = 0.8 / (1 + std::pow(std::hypot(p.x + 60, p.y - 74) / 300, 2));
  const double cosine = 300 / std::hypot(300, p.x - 105, p.y - 74);
  return lamp * std::pow(cosine, 4);
}

bool IsIn(const cv::Point2d& p, double x, double y, double side) {
  return std::max(std::abs(p.x - x), std::abs(p.y - y)) < side / 2;
}

// Reflectance of the printed sheet; coupons stick out of their wells by 2 mm and shade the paper
// below and right of them by half.
double Printed(const cv::Point2d& p) {
  for (const SheetMarker& m : A5().markers) {
    if (IsIn(p, m.x_mm, m.y_mm, m.side_mm)) return 0.04;
  }
  for (const SharpnessSquare& s : A5().sharpness_squares) {
    if (IsIn(p, s.x_mm, s.y_mm, s.side_mm)) return 0.04;
  }
  for (const GrayPatch& g : A5().grays) {
    if (IsIn(p, g.x_mm, g.y_mm, g.side_mm)) return g.reflectance;
  }
  for (const Well& w : A5().wells) {
    if (IsIn(p, w.x_mm + 2, w.y_mm + 2, w.width_mm)) return 0.3;
    if (IsIn(p, w.x_mm + 3, w.y_mm + 3, w.width_mm + 2)) return 0.5;
  }
  return 1;
}

Light Estimate(const std::function<double(const cv::Point2d&)>& scene) {
  const View view = WholeSheet();
  auto light = EstimateLight(RenderPlane(view, 0, scene), view, A5(), {});
  EXPECT_TRUE(light) << light.error().message;
  return light.value_or(EvenLight(1));
}

double WorstRelativeError(const Light& light) {
  double worst = 0;
  for (double x = 25; x <= 185; x += 10) {
    for (double y = 20; y <= 128; y += 9) {
      worst = std::max(worst, std::abs(light.At(x, y) / TrueLight({x, y}) - 1));
    }
  }
  return worst;
}

TEST(Light, RecoversLampAndVignettingBetweenCouponsAndShadows) {
  const Light light = Estimate([](const cv::Point2d& p) { return TrueLight(p) * Printed(p); });
  // Half a per cent: a tenth of the line contrast of the smoothest coupon.
  EXPECT_LT(WorstRelativeError(light), 0.005);
  EXPECT_THAT(light.warnings, IsEmpty());
  EXPECT_EQ(light.clipped_pct, 0);
  ASSERT_TRUE(light.tone);
  EXPECT_NEAR(light.tone->gamma, 1, 0.01);  // rendered by the sRGB curve itself
  EXPECT_NEAR(light.tone->scale, 1, 0.01);
  // At the wells' corners, by TrueLight itself.
  double darkest = 1;
  double brightest = 0;
  for (const Well& w : A5().wells) {
    for (const double dx : {-23, 23}) {
      for (const double dy : {-23, 23}) {
        darkest = std::min(darkest, TrueLight({w.x_mm + dx, w.y_mm + dy}));
        brightest = std::max(brightest, TrueLight({w.x_mm + dx, w.y_mm + dy}));
      }
    }
  }
  EXPECT_NEAR(light.unevenness, brightest / darkest - 1, 0.03);
}

TEST(Light, ASmudgeAndATornCornerDoNotBend) {
  const Light light = Estimate([](const cv::Point2d& p) {
    const double smudge = 1 - 0.15 * std::exp(-std::pow(cv::norm(p - cv::Point2d(30, 75)) / 5, 2));
    const bool torn = p.x + p.y < 15;
    return TrueLight(p) * (torn ? 0.15 : smudge * Printed(p));
  });
  EXPECT_LT(WorstRelativeError(light), 0.007);
}

TEST(Light, OverexposedPaperIsALowerBoundAndSaidSo) {
  // The middle of the sheet is clipped.
  const double gain = 1 / TrueLight({130, 74});
  const Light light = Estimate(
      [&](const cv::Point2d& p) { return std::min(1.0, gain * TrueLight(p) * Printed(p)); });
  EXPECT_GT(light.clipped_pct, 15);
  ASSERT_FALSE(light.warnings.empty());
  EXPECT_THAT(light.warnings[0], HasSubstr("% of the paper is over-exposed"));
  // Where it is not clipped it is still right, to two per cent.
  for (const double x : {140.0, 160.0, 185.0}) {
    EXPECT_NEAR(light.At(x, 74) / (gain * TrueLight({x, 74})), 1, 0.02);
  }
}

// All paper but a corner is clipped, and the lightest gray; the darker ones are not.
TEST(Light, GraysTellTheLightWherePaperIsClipped) {
  const double gain = 1 / TrueLight({200, 74});
  const Light light = Estimate(
      [&](const cv::Point2d& p) { return std::min(1.0, gain * TrueLight(p) * Printed(p)); });
  EXPECT_GT(light.clipped_pct, 70);
  double mean = 0;
  for (const GrayPatch& gray : A5().grays) {
    mean += gain * TrueLight({gray.x_mm, gray.y_mm}) / light.At(gray.x_mm, gray.y_mm) /
            static_cast<double>(A5().grays.size());
  }
  // The light's shape is lost, its level at the grays is not: they agree to a few per cent.
  EXPECT_NEAR(mean, 1, 0.03);
}

TEST(Light, WarnsOfAToneCurveFarFromSrgb) {
  const Light light =
      Estimate([](const cv::Point2d& p) { return std::pow(0.8 * Printed(p), 1.5); });
  ASSERT_TRUE(light.tone);
  EXPECT_NEAR(light.tone->gamma, 1.5, 0.02);
  ASSERT_FALSE(light.warnings.empty());
  EXPECT_THAT(light.warnings[0], HasSubstr("an exponent of 1.50"));
}

TEST(Light, RefusesDarknessAndMissingPaper) {
  const View view = WholeSheet();
  auto light = EstimateLight(
      RenderPlane(view, 0, [](const cv::Point2d& p) { return 0.01 * Printed(p); }), view, A5(), {});
  ASSERT_FALSE(light);
  EXPECT_THAT(light.error().message, HasSubstr("too dark"));

  CameraSetup aside;
  aside.looks_at_mm = {900, 900};
  light = EstimateLight(RenderPlane(view, 0, Printed), MakeView(aside), A5(), {});
  ASSERT_FALSE(light);
  EXPECT_THAT(light.error().message, HasSubstr("too little of the sheet's bare paper"));
}

TEST(Light, OptionsAreChecked) {
  EXPECT_NO_THROW(LightOptions().Check());
  EXPECT_THROW(LightOptions{.degree = 9}.Check(), BadOption);
}

}  // namespace
}  // namespace laygauge
