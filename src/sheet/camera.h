#pragma once

#include <Eigen/Core>
#include <Eigen/Geometry>
#include <opencv2/core.hpp>

namespace laygauge {

// Pinhole with Brown's radial and decentring distortion (Brown 1971, "Close-range camera
// calibration", Photogrammetric Engineering 37(8)), in OpenCV's form and order k1 k2 p1 p2.
// Pixels of the upright image; square pixels, no skew.
struct Camera {
  cv::Size image_size_px;
  double focal_px = 0;
  double center_x_px = 0;
  double center_y_px = 0;
  double k1 = 0, k2 = 0, p1 = 0, p2 = 0;

  // `point`: camera frame, x right, y down, z forward, z > 0, any unit.
  [[nodiscard]] Eigen::Vector2d Project(const Eigen::Vector3d& point) const;
};

// The sheet's frame is right-handed: x right, y down, z into the paper. A coupon's top lies at
// z = -thickness_mm.
struct SheetPose {
  Eigen::Matrix3d camera_from_sheet_rotation = Eigen::Matrix3d::Identity();
  Eigen::Vector3d camera_from_sheet_translation_mm = Eigen::Vector3d::Zero();

  [[nodiscard]] Eigen::Vector3d CameraFromSheet(const Eigen::Vector3d& point_mm) const {
    return camera_from_sheet_rotation * point_mm + camera_from_sheet_translation_mm;
  }
};

// What the camera sees of a sheet: together they map sheet points to pixels.
struct View {
  Camera camera;
  SheetPose pose;

  // Pixel at which a point `height_mm` above the paper appears.
  [[nodiscard]] Eigen::Vector2d PixelFromSheet(double x_mm, double y_mm, double height_mm) const;
  // Its derivative, pixels a millimetre; rows: pixel x, y; columns: by sheet x, y.
  [[nodiscard]] Eigen::Matrix2d PixelBySheet(double x_mm, double y_mm, double height_mm) const;
  // Local scale at that point: pixels a millimetre, the smaller of the two principal ones.
  [[nodiscard]] double PxPerMm(double x_mm, double y_mm, double height_mm) const;
  // The sheet point `height_mm` above the paper that appears at the pixel (iterative undistortion).
  [[nodiscard]] Eigen::Vector2d SheetFromPixel(const Eigen::Vector2d& pixel,
                                               double height_mm) const;
};

}  // namespace laygauge
