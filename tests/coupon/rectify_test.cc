#include "coupon/rectify.h"

#include <gtest/gtest.h>

#include <cmath>

#include "coupon/render_scene.h"

namespace laygauge {
namespace {

PlaneFrame FrameAt(const cv::Point2d& center_mm, double turn_deg, double px_per_mm,
                   double height_mm) {
  PlaneFrame frame;
  frame.size_px = {301, 301};
  frame.px_per_mm = px_per_mm;
  frame.origin_px = {150, 150};
  frame.center_mm = center_mm;
  frame.turn_deg = turn_deg;
  frame.height_mm = height_mm;
  return frame;
}

double LargestError(const cv::Mat& picture, const PlaneFrame& frame,
                    const std::function<double(const cv::Point2d&)>& light) {
  double worst = 0;
  for (int y = 0; y < picture.rows; ++y) {
    for (int x = 0; x < picture.cols; ++x) {
      const cv::Point2d at = frame.SheetFromFrame({static_cast<double>(x), static_cast<double>(y)});
      worst = std::max(worst, std::abs(picture.at<float>(y, x) - light(at)));
    }
  }
  return worst;
}

// Waves of 6 photo pixels and of 7.
double Waves(const cv::Point2d& p) {
  return 0.4 + 0.2 * std::sin(2 * CV_PI * p.x / 0.43) * std::cos(2 * CV_PI * p.y / 0.5);
}

TEST(Rectify, ReturnsThePlaneThroughLensAndPose) {
  const View view = MakeView({});
  const Photo photo = RenderPlane(view, 2.5, Waves);
  const PlaneFrame frame = FrameAt({50, 45}, 4, 20, 2.5);
  // A displacement of 0.01 photo px would show as 0.2 * 2 pi / 6 * 0.01 = 0.002; the spline's own
  // loss at 6 px a wave is below 1e-3 of the amplitude.
  EXPECT_LT(LargestError(Rectify(photo, view, frame), frame, Waves), 0.002);
  // Bilinear interpolation loses up to 13 % of the amplitude at that wave, in encoded terms too;
  // it only has to lie in the right place.
  const cv::Mat encoded = RectifyEncoded(photo, view, frame);
  EXPECT_LT(std::abs(cv::mean(encoded)[0] - 0.66), 0.02);
}

TEST(Rectify, TheHeightMatters) {
  const View view = MakeView({});
  const Photo photo = RenderPlane(view, 2.5, Waves);
  // The paper's plane instead of the top's: shifted by 2.5 * 40 / 300 mm, a wave's whole length.
  const PlaneFrame frame = FrameAt({50, 45}, 0, 20, 0);
  EXPECT_GT(LargestError(Rectify(photo, view, frame), frame, Waves), 0.1);
}

TEST(Rectify, TurnsCounterClockwiseAsSeen) {
  PlaneFrame frame = FrameAt({50, 45}, 90, 20, 0);
  // The frame's x axis then points up the sheet: towards smaller y.
  const cv::Point2d right = frame.SheetFromFrame({170, 150});
  EXPECT_NEAR(right.x, 50, 1e-9);
  EXPECT_NEAR(right.y, 44, 1e-9);
}

TEST(Rectify, DoesNotAliasWhatIsFinerThanItsPixels) {
  CameraSetup setup;
  setup.px_per_mm = 40;
  setup.size_px = {1400, 1400};
  const View view = MakeView(setup);
  // 0.15 mm: 6 pixels of the photo, but one and a half of a frame at 10 px/mm: beyond what that
  // can carry. Sampled as they are they would come out at full amplitude, as a moire.
  const auto fine = [](const cv::Point2d& p) {
    return 0.4 + 0.2 * std::sin(2 * CV_PI * p.x / 0.15);
  };
  const Photo photo = RenderPlane(view, 0, fine);
  const cv::Mat picture = Rectify(photo, view, FrameAt({53, 48}, 0, 10, 0));
  cv::Scalar mean;
  cv::Scalar deviation;
  cv::meanStdDev(picture, mean, deviation);
  EXPECT_NEAR(mean[0], 0.4, 0.002);
  EXPECT_LT(deviation[0], 0.2 / std::sqrt(2.0) * 0.2);  // a fifth of the true amplitude
}

TEST(Rectify, OutsideThePhotoItsEdgeIsRepeated) {
  const View view = MakeView({});
  const Photo photo = RenderPlane(view, 0, [](const cv::Point2d&) { return 0.25; });
  const cv::Mat picture = Rectify(photo, view, FrameAt({500, 400}, 0, 20, 0));
  EXPECT_NEAR(picture.at<float>(0, 0), 0.25, 1e-4);
  EXPECT_NEAR(picture.at<float>(300, 300), 0.25, 1e-4);
  EXPECT_TRUE(IsInPhoto(photo, view, {53, 48}, 0, 10));
  EXPECT_FALSE(IsInPhoto(photo, view, {500, 400}, 0, 10));
}

}  // namespace
}  // namespace laygauge
