#include "sheet/planar_pose.h"

#include <cmath>
#include <limits>
#include <opencv2/calib3d.hpp>

namespace laygauge {
namespace {

double SquaredError(const std::vector<MarkerSighting>& markers, const LensVector& lens,
                    const PhotoVector& pose) {
  double sum = 0;
  for (const MarkerSighting& marker : markers) {
    for (const Eigen::Vector2d& r : CornerResiduals(lens, pose, marker)) sum += r.squaredNorm();
  }
  return sum;
}

}  // namespace

std::vector<PhotoVector> PlanarPoses(const std::vector<MarkerSighting>& markers,
                                     const LensVector& lens) {
  std::vector<cv::Point3d> points;
  std::vector<cv::Point2d> pixels;
  for (const MarkerSighting& m : markers) {
    const double h = m.half_side_mm;
    const double x = m.centre_mm.x();
    const double y = m.centre_mm.y();
    points.insert(points.end(),
                  {{x - h, y - h, 0}, {x + h, y - h, 0}, {x + h, y + h, 0}, {x - h, y + h, 0}});
    for (const Eigen::Vector2d& c : m.corners_px) pixels.emplace_back(c.x(), c.y());
  }
  const double focal_px = std::exp(lens[kLogFocal]);
  const cv::Matx33d matrix(focal_px, 0, lens[kCenterX], 0, focal_px, lens[kCenterY], 0, 0, 1);
  std::vector<cv::Mat> turns;
  std::vector<cv::Mat> shifts;
  cv::solvePnPGeneric(points, pixels, matrix, cv::noArray(), turns, shifts, false,
                      cv::SOLVEPNP_IPPE);
  std::vector<PhotoVector> poses;
  for (size_t i = 0; i < turns.size(); ++i) {
    const cv::Vec3d turn = turns[i];
    const cv::Vec3d shift = shifts[i];
    if (!(shift[2] > 0)) continue;  // behind the camera
    PhotoVector pose;
    pose << turn[0], turn[1], turn[2], focal_px * shift[0] / shift[2] + lens[kCenterX],
        focal_px * shift[1] / shift[2] + lens[kCenterY], std::log(focal_px / shift[2]), 0, 0;
    if (pose.allFinite()) poses.push_back(pose);
  }
  return poses;
}

double GuessFocal(const std::vector<MarkerSighting>& markers, LensVector lens, double diagonal_px,
                  double log_focal_sd) {
  constexpr double kCornerDeviation_px = 1;  // most of it distortion, which is left out here
  const double expected = lens[kLogFocal];
  double best = expected;
  double best_cost = std::numeric_limits<double>::infinity();
  for (int rung = -4; rung <= 8; ++rung) {
    lens[kLogFocal] = std::log(diagonal_px) + rung * std::log(2) / 4;
    const double from_prior = (lens[kLogFocal] - expected) / log_focal_sd;
    for (const PhotoVector& pose : PlanarPoses(markers, lens)) {
      const double cost =
          SquaredError(markers, lens, pose) / (kCornerDeviation_px * kCornerDeviation_px) +
          from_prior * from_prior;
      if (cost < best_cost) {
        best_cost = cost;
        best = lens[kLogFocal];
      }
    }
  }
  return std::exp(best);
}

}  // namespace laygauge
