#include "sheet/camera.h"

#include <cmath>

#include "sheet/brown.h"

namespace laygauge {
namespace {

// Newton's method on DistortBrown. Lenses that this program accepts distort by a few per cent, so
// the start is close and a handful of steps reaches rounding.
Eigen::Vector2d Undistort(const Camera& camera, const Eigen::Vector2d& distorted) {
  constexpr int kMaxSteps = 20;
  constexpr double kEnough = 1e-14;  // of the focal length: far below a pixel
  Eigen::Vector2d point = distorted;
  for (int step = 0; step < kMaxSteps; ++step) {
    const Eigen::Vector2d error =
        DistortBrown<double>(point, camera.k1, camera.k2, camera.p1, camera.p2) - distorted;
    if (error.norm() < kEnough) break;
    point -=
        DistortBrownDerivative(point, camera.k1, camera.k2, camera.p1, camera.p2).inverse() * error;
  }
  return point;
}

}  // namespace

Eigen::Vector2d Camera::Project(const Eigen::Vector3d& point) const {
  const Eigen::Vector2d distorted =
      DistortBrown<double>(point.head<2>() / point.z(), k1, k2, p1, p2);
  return {focal_px * distorted.x() + center_x_px, focal_px * distorted.y() + center_y_px};
}

Eigen::Vector2d View::PixelFromSheet(double x_mm, double y_mm, double height_mm) const {
  return camera.Project(pose.CameraFromSheet({x_mm, y_mm, -height_mm}));
}

Eigen::Matrix2d View::PixelBySheet(double x_mm, double y_mm, double height_mm) const {
  const Eigen::Vector3d point = pose.CameraFromSheet({x_mm, y_mm, -height_mm});
  const Eigen::Vector2d normalised = point.head<2>() / point.z();
  Eigen::Matrix<double, 2, 3> normalised_by_point;
  normalised_by_point << 1 / point.z(), 0, -normalised.x() / point.z(), 0, 1 / point.z(),
      -normalised.y() / point.z();
  return camera.focal_px *
         DistortBrownDerivative(normalised, camera.k1, camera.k2, camera.p1, camera.p2) *
         normalised_by_point * pose.camera_from_sheet_rotation.leftCols<2>();
}

double View::PxPerMm(double x_mm, double y_mm, double height_mm) const {
  // Singular values of a 2 x 2 matrix: half the sum and half the difference of these two lengths.
  const Eigen::Matrix2d d = PixelBySheet(x_mm, y_mm, height_mm);
  const double conformal = std::hypot(d(0, 0) + d(1, 1), d(0, 1) - d(1, 0));
  const double anticonformal = std::hypot(d(0, 0) - d(1, 1), d(0, 1) + d(1, 0));
  return std::abs(conformal - anticonformal) / 2;
}

Eigen::Vector2d View::SheetFromPixel(const Eigen::Vector2d& pixel, double height_mm) const {
  const Eigen::Vector2d normalised =
      Undistort(camera, {(pixel.x() - camera.center_x_px) / camera.focal_px,
                         (pixel.y() - camera.center_y_px) / camera.focal_px});
  // The ray through the pixel, in the sheet's frame, meets the plane z = -height.
  const Eigen::Matrix3d sheet_from_camera = pose.camera_from_sheet_rotation.transpose();
  const Eigen::Vector3d eye = -sheet_from_camera * pose.camera_from_sheet_translation_mm;
  const Eigen::Vector3d ray = sheet_from_camera * normalised.homogeneous();
  const double distance = (-height_mm - eye.z()) / ray.z();
  return (eye + distance * ray).head<2>();
}

}  // namespace laygauge
