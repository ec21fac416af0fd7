#include "sheet/camera.h"

#include <gtest/gtest.h>

#include <opencv2/calib3d.hpp>
#include <opencv2/core/eigen.hpp>

namespace laygauge {
namespace {

// A wide lens, strongly distorted, tilted by about 20 degrees, the sheet turned by 130.
View TiltedView() {
  View view;
  view.camera = {{4032, 3024}, 2912, 2030.2, 1498.7, -0.11, 0.06, 0.0013, -0.0008};
  view.pose.camera_from_sheet_rotation = (Eigen::AngleAxisd(0.35, Eigen::Vector3d(0.6, 0.8, 0)) *
                                          Eigen::AngleAxisd(2.27, Eigen::Vector3d::UnitZ()))
                                             .toRotationMatrix();
  view.pose.camera_from_sheet_translation_mm = {120, -60, 210};
  return view;
}

cv::Point2d ProjectByOpenCv(const View& view, const cv::Point3d& point) {
  cv::Mat rotation;
  cv::Mat turn;
  cv::eigen2cv(view.pose.camera_from_sheet_rotation, rotation);
  cv::Rodrigues(rotation, turn);
  const auto& t = view.pose.camera_from_sheet_translation_mm;
  const Camera& c = view.camera;
  const cv::Matx33d matrix(c.focal_px, 0, c.center_x_px, 0, c.focal_px, c.center_y_px, 0, 0, 1);
  std::vector<cv::Point2d> pixels;
  cv::projectPoints(std::vector{point}, turn, cv::Vec3d(t.x(), t.y(), t.z()), matrix,
                    cv::Vec4d(c.k1, c.k2, c.p1, c.p2), pixels);
  return pixels[0];
}

// Reference: OpenCV's projectPoints. 1e-9 px: both compute in double; the rotation's way through
// a Rodrigues vector costs a few ulp of 4000 px (4e-13) each.
TEST(Camera, ProjectsAsOpenCvDoes) {
  const View view = TiltedView();
  for (double x_mm = 0; x_mm <= 210; x_mm += 42) {
    for (double y_mm = 0; y_mm <= 148; y_mm += 37) {
      for (const double height_mm : {0.0, 2.5}) {
        const cv::Point2d expected = ProjectByOpenCv(view, {x_mm, y_mm, -height_mm});
        const Eigen::Vector2d pixel = view.PixelFromSheet(x_mm, y_mm, height_mm);
        EXPECT_NEAR(pixel.x(), expected.x, 1e-9);
        EXPECT_NEAR(pixel.y(), expected.y, 1e-9);
      }
    }
  }
}

// An inverse undoes its function; 1e-9 mm is 1e-8 px at this scale, rounding of the projection.
TEST(Camera, SheetFromPixelUndoesTheProjection) {
  const View view = TiltedView();
  for (double x_mm = 0; x_mm <= 210; x_mm += 42) {
    for (double y_mm = 0; y_mm <= 148; y_mm += 37) {
      const Eigen::Vector2d pixel = view.PixelFromSheet(x_mm, y_mm, 2.5);
      const Eigen::Vector2d back = view.SheetFromPixel(pixel, 2.5);
      EXPECT_NEAR(back.x(), x_mm, 1e-9);
      EXPECT_NEAR(back.y(), y_mm, 1e-9);
    }
  }
}

// Central differences of OpenCV's projection with a step of 0.01 mm: the third derivative is
// about 1e-4 px/mm^3, so their own error is below 1e-7 px/mm; rounding adds 1e-10.
TEST(Camera, DerivativeAgreesWithDifferences) {
  const View view = TiltedView();
  const double step_mm = 0.01;
  for (const cv::Point2d at : {cv::Point2d(10, 12), cv::Point2d(105, 74), cv::Point2d(199, 137)}) {
    const cv::Point2d by_x = (ProjectByOpenCv(view, {at.x + step_mm, at.y, -2.5}) -
                              ProjectByOpenCv(view, {at.x - step_mm, at.y, -2.5})) /
                             (2 * step_mm);
    const cv::Point2d by_y = (ProjectByOpenCv(view, {at.x, at.y + step_mm, -2.5}) -
                              ProjectByOpenCv(view, {at.x, at.y - step_mm, -2.5})) /
                             (2 * step_mm);
    Eigen::Matrix2d expected;
    expected << by_x.x, by_y.x, by_x.y, by_y.y;
    EXPECT_LT((view.PixelBySheet(at.x, at.y, 2.5) - expected).cwiseAbs().maxCoeff(), 1e-6);
  }
}

// Pinhole looking straight down from 280 mm with focal length 2800 px: 10 px/mm on the paper, and
// 2800 / 277.5 on a top 2.5 mm above it. Tilted by 60 degrees about x, the far direction shrinks by
// cos 60 at the point below the lens axis.
TEST(Camera, ScaleOfAPinholeByHand) {
  View view;
  view.camera = {{4000, 3000}, 2800, 2000, 1500, 0, 0, 0, 0};
  view.pose.camera_from_sheet_translation_mm = {0, 0, 280};
  EXPECT_NEAR(view.PxPerMm(30, 40, 0), 10, 1e-12);
  EXPECT_NEAR(view.PxPerMm(30, 40, 2.5), 2800 / 277.5, 1e-12);
  view.pose.camera_from_sheet_rotation =
      Eigen::AngleAxisd(std::acos(0.5), Eigen::Vector3d::UnitX()).toRotationMatrix();
  EXPECT_NEAR(view.PxPerMm(0, 0, 0), 5, 1e-12);
}

}  // namespace
}  // namespace laygauge
