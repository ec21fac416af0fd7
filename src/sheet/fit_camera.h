#pragma once

#include <Eigen/Core>
#include <array>
#include <vector>

#include "sheet/camera.h"
#include "sheet/refine_corners.h"

// The least-squares core of EstimateCameras: unknowns, residuals and priors.
namespace laygauge {

// A marker's place on the sheet, about the sheet's centre, and where its corners were seen.
struct MarkerSighting {
  int id = 0;
  Eigen::Vector2d centre_mm;
  double half_side_mm = 0;
  SquareCorners corners_px;
};

// Unknowns that photos share, in this order.
inline constexpr int kLogFocal = 0, kCenterX = 1, kCenterY = 2, kK1 = 3, kK2 = 4, kP1 = 5, kP2 = 6;
inline constexpr int kLensUnknowns = 7;
using LensVector = Eigen::Matrix<double, kLensUnknowns, 1>;

// Unknowns of one photo, in this order: rotation vector of the sheet in the camera's frame; pixel
// at which a pinhole shows the sheet's centre, and the logarithm of the scale there in px/mm (so
// that a change of focal length or principal point leaves the picture nearly as it is, and the
// descent has no curved valley to follow); what the printing did: ink spread (mm, each edge
// outwards), and how much longer the page came out down than across (share).
inline constexpr int kTurn = 0, kSeenX = 3, kSeenY = 4, kLogScale = 5, kSpread = 6, kStretch = 7;
inline constexpr int kPhotoUnknowns = 8;
using PhotoVector = Eigen::Matrix<double, kPhotoUnknowns, 1>;

// Normal priors; what has none has an infinite standard deviation.
struct CameraPriors {
  LensVector lens_mean;
  LensVector lens_sd;
  double spread_sd_mm = 0;
  double stretch_sd = 0;
};

struct CameraFit {
  LensVector lens;
  std::vector<PhotoVector> photos;
  double corner_sd_px = 0;     // of a corner's coordinate, as the residuals show it
  Eigen::MatrixXd covariance;  // of lens, then of each photo, in the order above
  bool converged = false;
};

// The sheet's centre in the camera's frame, mm.
[[nodiscard]] Eigen::Vector3d CentreInCamera(const LensVector& lens, const PhotoVector& photo);
// Residuals of a marker's corners, seen minus expected, px.
[[nodiscard]] SquareCorners CornerResiduals(const LensVector& lens, const PhotoVector& photo,
                                            const MarkerSighting& marker);
// The camera and pose in the terms of camera.h, for a sheet whose centre is at `centre_mm`.
[[nodiscard]] View ViewOf(const LensVector& lens, const PhotoVector& photo, cv::Size image_size_px,
                          const Eigen::Vector2d& centre_mm);

// Joint weighted least squares from the start in `fit` (bundle adjustment, e.g. Triggs et al. 2000,
// "Bundle adjustment - a modern synthesis", doi 10.1007/3-540-44480-7_21), with a Huber loss for
// each marker. The weight of the corners against the priors follows their own scatter.
[[nodiscard]] CameraFit FitCamera(CameraFit fit,
                                  const std::vector<std::vector<MarkerSighting>>& photos,
                                  const CameraPriors& priors, int threads);

}  // namespace laygauge
