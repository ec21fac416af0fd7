#include "sheet/refine_corners.h"

#include <gtest/gtest.h>

#include <cmath>
#include <opencv2/imgproc.hpp>
#include <random>

#include "base/error.h"
#include "sheet/camera.h"

namespace laygauge {
namespace {

using Eigen::Vector2d;

constexpr double kInk = 0.04;
constexpr double kPaper = 0.8;

struct Square {
  Vector2d centre_px;
  double side_px = 0;
  double turn = 0;  // radians

  [[nodiscard]] SquareCorners Corners() const {
    SquareCorners corners;
    const std::array<Vector2d, 4> signs{Vector2d(-1, -1), Vector2d(1, -1), Vector2d(1, 1),
                                        Vector2d(-1, 1)};
    for (size_t k = 0; k < 4; ++k) {
      corners[k] = centre_px + Eigen::Rotation2Dd(turn) * (signs[k] * side_px / 2);
    }
    return corners;
  }
};

// A square blurred by a Gaussian is, in its own frame, a product of two differences of the normal
// distribution's function: exact at any turn.
cv::Mat DrawBlurred(const Square& square, double blur_sd_px, cv::Size size) {
  cv::Mat light(size, CV_32FC1);
  const auto inside = [&](double t) {
    const double scale = 1 / (blur_sd_px * std::sqrt(2.0));
    return (std::erf((t + square.side_px / 2) * scale) -
            std::erf((t - square.side_px / 2) * scale)) /
           2;
  };
  for (int y = 0; y < size.height; ++y) {
    for (int x = 0; x < size.width; ++x) {
      const Vector2d own = Eigen::Rotation2Dd(-square.turn) * (Vector2d(x, y) - square.centre_px);
      light.at<float>(y, x) =
          static_cast<float>(kPaper + (kInk - kPaper) * inside(own.x()) * inside(own.y()));
    }
  }
  return light;
}

SquareCorners Shifted(SquareCorners corners, double by_px) {
  corners[0] += Vector2d(by_px, -by_px);
  corners[1] += Vector2d(by_px, by_px);
  corners[2] += Vector2d(-by_px, by_px / 2);
  return corners;
}

double WorstError(const SquareCorners& found, const SquareCorners& truth) {
  double worst = 0;
  for (size_t k = 0; k < 4; ++k) worst = std::max(worst, (found[k] - truth[k]).norm());
  return worst;
}

// Truth is analytic. Linear interpolation between pixels misreads an edge that is as sharp as a
// pixel and lies along the rows by up to 0.03 px, the same all along the side: 0.05 px for a corner
// of two such sides; 0.015 px where the edge is softer or aslant, so that the misreadings average
// out.
TEST(RefineCorners, FindsABlurredSquare) {
  for (const double turn : {0.0, 0.1, 0.4, 0.785, 1.9}) {
    for (const double blur_sd_px : {0.7, 1.5, 3.0}) {
      const Square square{{130.3, 124.8}, 120, turn};
      const cv::Mat light = DrawBlurred(square, blur_sd_px, {260, 250});
      const auto found = RefineCorners(light, {0, 0}, Shifted(square.Corners(), 4));
      ASSERT_TRUE(found.has_value()) << turn << " " << blur_sd_px;
      const double tolerance_px = turn == 0 && blur_sd_px < 1 ? 0.05 : 0.015;
      EXPECT_LT(WorstError(found->corners_px, square.Corners()), tolerance_px)
          << turn << " " << blur_sd_px;
    }
  }
}

// White noise of 1 % of full scale: an edge of slope 0.76 / (1.2 sqrt(2 pi)) a pixel moves by
// 0.04 px a profile, a line of 60 profiles by 0.01 px at its ends; four such errors bound a corner.
TEST(RefineCorners, NoiseMovesACornerLittle) {
  const Square square{{130.3, 124.8}, 120, 0.3};
  cv::Mat light = DrawBlurred(square, 1.2, {260, 250});
  std::mt19937 random(5);
  std::normal_distribution<float> noise(0, 0.01F);
  for (auto it = light.begin<float>(); it != light.end<float>(); ++it) *it += noise(random);
  const auto found = RefineCorners(light, {0, 0}, square.Corners());
  ASSERT_TRUE(found.has_value());
  EXPECT_LT(WorstError(found->corners_px, square.Corners()), 0.05);
  EXPECT_GT(found->scatter_px, 0.01);
  EXPECT_LT(found->scatter_px, 0.1);
}

// The same part cut out elsewhere gives the same corners, in the photograph's pixels.
TEST(RefineCorners, WorksInAPartOfThePhotograph) {
  const Square square{{130.3, 124.8}, 120, 0.3};
  const cv::Mat light = DrawBlurred(square, 1.2, {260, 250});
  const cv::Rect part(22, 17, 215, 220);
  const auto whole = RefineCorners(light, {0, 0}, square.Corners());
  const auto cut = RefineCorners(light(part), part.tl(), square.Corners());
  ASSERT_TRUE(whole.has_value());
  ASSERT_TRUE(cut.has_value());
  EXPECT_LT(WorstError(cut->corners_px, whole->corners_px), 1e-9);
}

// Dirt over a sixth of one side is left out of its line. 0.02 px: what is left of that side still
// spans it.
TEST(RefineCorners, DirtOnASideIsLeftOut) {
  const Square square{{130.3, 124.8}, 120, 0.0};
  cv::Mat light = DrawBlurred(square, 1.2, {260, 250});
  cv::circle(light, {90, 65}, 10, cv::Scalar(kInk), cv::FILLED);
  const auto found = RefineCorners(light, {0, 0}, square.Corners());
  ASSERT_TRUE(found.has_value());
  EXPECT_LT(WorstError(found->corners_px, square.Corners()), 0.02);
}

TEST(RefineCorners, NothingWhereASideIsHiddenFaintOrOutside) {
  const Square square{{130.3, 124.8}, 120, 0.0};
  const cv::Mat light = DrawBlurred(square, 1.2, {260, 250});
  cv::Mat hidden = light.clone();
  cv::rectangle(hidden, {0, 0, 260, 90}, cv::Scalar(kPaper), cv::FILLED);
  EXPECT_FALSE(RefineCorners(hidden, {0, 0}, square.Corners()).has_value());
  const cv::Mat faint = 0.05 * light + 0.7;
  EXPECT_FALSE(RefineCorners(faint, {0, 0}, square.Corners()).has_value());
  EXPECT_FALSE(RefineCorners(light({0, 0, 185, 250}), {0, 0}, square.Corners()).has_value());
}

// A lens bends a marker's side; the corner is where the straight lines meet. A 26 mm
// equivalent lens with strong distortion (k1 = -0.08: 6 % at the corner), a 12 mm side in the
// corner of a picture that shows 230 mm: 0.1 px, a third of the reprojection error aimed at.
TEST(RefineCorners, ABentSideIsStraightEnough) {
  View view;
  view.camera = {{4032, 3024}, 2900, 2015.5, 1511.5, -0.08, 0.01, 0, 0};
  view.pose.camera_from_sheet_translation_mm = {-115, -86, 170};
  const double side_mm = 12;
  const double x0_mm = 5;
  const double y0_mm = 5;
  const auto line_along = [&](double ux, double uy) {
    std::vector<cv::Point2f> points;
    for (double t = 0.1; t < 0.91; t += 0.02) {
      const Vector2d p = view.PixelFromSheet(x0_mm + t * side_mm * ux, y0_mm + t * side_mm * uy, 0);
      points.emplace_back(static_cast<float>(p.x() - 100), static_cast<float>(p.y() - 100));
    }
    cv::Vec4f line;
    cv::fitLine(points, line, cv::DIST_L2, 0, 1e-6, 1e-6);
    return line;
  };
  const cv::Vec4f top = line_along(1, 0);
  const cv::Vec4f left = line_along(0, 1);
  Eigen::Matrix2d directions;
  directions << top[0], -left[0], top[1], -left[1];
  const Vector2d along = directions.inverse() * Vector2d(left[2] - top[2], left[3] - top[3]);
  const Vector2d met(top[2] + along.x() * top[0] + 100, top[3] + along.x() * top[1] + 100);
  EXPECT_LT((met - view.PixelFromSheet(x0_mm, y0_mm, 0)).norm(), 0.15);
}

TEST(RefineCorners, OptionsAreChecked) {
  EXPECT_NO_THROW(RefineCornersOptions{}.Check());
  EXPECT_THROW(RefineCornersOptions{.first_reach = 0.2}.Check(), BadOption);
  EXPECT_THROW((RefineCornersOptions{.first_reach = 0.05, .reach = 0.06}.Check()), BadOption);
  EXPECT_THROW(RefineCornersOptions{.most_profiles = 3}.Check(), BadOption);
  EXPECT_THROW(RefineCornersOptions{.least_contrast = 0}.Check(), BadOption);
  EXPECT_THROW(RefineCornersOptions{.most_scatter_px = 0}.Check(), BadOption);
}

}  // namespace
}  // namespace laygauge
