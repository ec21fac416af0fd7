#include "coupon/photo_noise.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <random>

#include "coupon/equalizing_kernel.h"
#include "photo/srgb.h"
#include "support/truth_view.h"

namespace laygauge {
namespace {

using ::testing::HasSubstr;

// A camera straight above the A5 sheet, 17 pixels a mm.
View StraightView() {
  View view;
  view.camera = {{3700, 2700}, 4000, 1849.5, 1349.5, 0, 0, 0, 0};
  view.pose.camera_from_sheet_translation_mm = {-105, -74, 4000 / 17.0};
  return view;
}

// The sheet's flat areas (squares drawn upright, larger than they are, so that tilt does not
// matter) with white Gaussian noise of variance kDark + kByLight * light, 16 bit.
constexpr double kDark = 4e-6;
constexpr double kByLight = 5e-5;

Photo MakeNoisyPhoto() {
  Photo photo;
  photo.file = "noisy.png";
  const View view = StraightView();
  cv::Mat linear(view.camera.image_size_px, CV_32FC1, cv::Scalar(0.8));
  const SheetDescription& sheet = ShippedSheet("a5-6");
  const auto draw = [&](double x_mm, double y_mm, double side_mm, double light) {
    const Eigen::Vector2d low = view.PixelFromSheet(x_mm - side_mm / 2, y_mm - side_mm / 2, 0);
    const int side_px = static_cast<int>(side_mm * 17);
    linear(cv::Rect(static_cast<int>(low.x()), static_cast<int>(low.y()), side_px, side_px)) =
        light;
  };
  for (const auto& square : sheet.sharpness_squares) draw(square.x_mm, square.y_mm, 8, 0.04);
  for (const auto& gray : sheet.grays) draw(gray.x_mm, gray.y_mm, 3.6, 0.8 * gray.reflectance);
  std::mt19937 random(3);
  std::normal_distribution<float> normal;
  photo.encoded.create(linear.size(), CV_16UC1);
  for (int y = 0; y < linear.rows; ++y) {
    for (int x = 0; x < linear.cols; ++x) {
      const float light = linear.at<float>(y, x);
      const double noisy = light + std::sqrt(kDark + kByLight * light) * normal(random);
      photo.encoded.at<std::uint16_t>(y, x) = static_cast<std::uint16_t>(
          std::lround(65535 * SrgbFromLinear(std::clamp(noisy, 0.0, 1.0))));
    }
  }
  return photo;
}

Photo NoisyPhoto() {
  static const Photo kPhoto = MakeNoisyPhoto();
  Photo copy = kPhoto;
  copy.encoded = kPhoto.encoded.clone();
  return copy;
}

SheetSharpness SharpnessOf(const PointSpread& spread) {
  SheetSharpness sharpness;
  sharpness.blur_x_mm = {{spread.blur_sd_mm, 0, 0}, spread.blur_sd_mm, spread.blur_sd_mm};
  sharpness.blur_y_mm = sharpness.blur_x_mm;
  sharpness.pixel_mm = {{1 / 17.0, 0, 0}, 1 / 17.0, 1 / 17.0};
  sharpness.sharpening = spread.sharpening;
  sharpness.halo_sd_px = spread.halo_sd_mm * 17;
  return sharpness;
}

// Analytic: white noise through a linear filter has its variance times the sum of the squared
// taps. 8 %: 8 squares of paper of 51 x 51 pixels, of which the filter leaves every fourth or so
// independent, know their standard deviation to 1.4 %, the darker areas to 2 to 5 %.
TEST(MeasureNoise, IsThatOfFilteredWhiteNoise) {
  const Photo photo = NoisyPhoto();
  for (const PointSpread& spread : {PointSpread{0.045, 0, 0}, PointSpread{0.044, 0.45, 0.07}}) {
    const SheetSharpness sharpness = SharpnessOf(spread);
    const auto noise =
        MeasureNoise(photo, StraightView(), ShippedSheet("a5-6"), sharpness, 0.06, 2);
    ASSERT_TRUE(noise) << noise.error().message;
    cv::Mat impulse(101, 101, CV_32FC1, cv::Scalar(0));
    impulse.at<float>(50, 50) = 1;
    const cv::Mat kernel = DesignEqualizer(sharpness.At(100, 70, 0), 17, 0.06, 2).Apply(impulse);
    const double gain = kernel.dot(kernel);
    for (const double light : {0.05, 0.2, 0.7}) {
      const double expected = std::sqrt(gain * (kDark + kByLight * light)) / light;
      EXPECT_NEAR(noise->RelativeSd(light), expected, 0.08 * expected) << light;
    }
  }
}

// A smudge on one gray and one paper area: much more than noise there, and left out. Same figure.
TEST(MeasureNoise, LeavesOutWhatIsNotFlat) {
  Photo photo = NoisyPhoto();
  const SheetSharpness sharpness = SharpnessOf({0.045, 0, 0});
  const auto clean = MeasureNoise(photo, StraightView(), ShippedSheet("a5-6"), sharpness, 0.06, 2);
  const GrayPatch& gray = ShippedSheet("a5-6").grays[1];
  const Eigen::Vector2d at = StraightView().PixelFromSheet(gray.x_mm, gray.y_mm, 0);
  cv::Mat(photo.encoded, cv::Rect(cv::Point(at.x(), at.y()), cv::Size(20, 20))) = 20000;
  const auto dirty = MeasureNoise(photo, StraightView(), ShippedSheet("a5-6"), sharpness, 0.06, 2);
  ASSERT_TRUE(clean && dirty);
  EXPECT_NEAR(dirty->RelativeSd(0.3), clean->RelativeSd(0.3), 0.08 * clean->RelativeSd(0.3));
}

TEST(MeasureNoise, NothingFlatIsAProblem) {
  Photo photo;
  photo.file = "tiny.png";
  photo.encoded = cv::Mat(20, 20, CV_8UC1, cv::Scalar(100));
  const auto noise = MeasureNoise(photo, StraightView(), ShippedSheet("a5-6"),
                                  SharpnessOf({0.045, 0, 0}), 0.06, 2);
  ASSERT_FALSE(noise);
  EXPECT_THAT(noise.error().message, HasSubstr("tiny.png: no flat area"));
}

}  // namespace
}  // namespace laygauge
