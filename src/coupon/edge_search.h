#pragma once

#include <opencv2/core.hpp>
#include <vector>

#include "coupon/outline.h"

namespace laygauge {

// Position and turn of a coupon in a picture's frame, mm (x right, y down) from its origin.
struct Pose {
  cv::Point2d center_mm;
  double turn_deg = 0;  // counter-clockwise as seen
};

// Height lines of brightness: the gradient of a picture, per mm.
struct GradientPicture {
  cv::Mat by_x;  // CV_32FC1; rows are stored with room beyond their end, for MakeGradient's user
  cv::Mat by_y;
  double px_per_mm = 10;
  cv::Point2d origin_px;
};

[[nodiscard]] GradientPicture MakeGradient(const cv::Mat& picture, double px_per_mm,
                                           const cv::Point2d& origin_px, double blur_sd_px);

// How a wall standing below an edge of the top shows: its foot appears this far outward of the
// edge (negative: hidden under it). Linear in position: foot = offset - point * per_mm.
struct WallView {
  cv::Point2d offset_mm;  // at the picture's origin
  double per_mm = 0;      // thickness over the camera's height
  [[nodiscard]] double FootOutward_mm(const cv::Point2d& at_mm, const cv::Point2d& outward) const {
    return outward.dot(offset_mm - at_mm * per_mm);
  }
};

struct PoseGrid {
  Pose middle;
  double reach_mm = 4.5;  // positions: this far either way, one pixel apart
  double turn_reach_deg = 8;
  double turn_step_deg = 1;
  // Tried on top of each of these turns. The outline must look the same after each of them, as its
  // score is found only once.
  std::vector<double> same_outline_deg = {0};
};

struct ScoredPose {
  Pose pose;
  double score = 0;  // 0..1: share of the edges' length that is seen, weighed by contrast
};

// The best pose of each turn, best first. The score of a piece is the brightness step
// across it, averaged along it (texture cancels in that, an edge of either sign does not), s / (s +
// half); for a piece under which the wall shows, edge and foot count together.
[[nodiscard]] std::vector<ScoredPose> SearchPoses(const GradientPicture& gradient,
                                                  const std::vector<EdgePiece>& pieces,
                                                  const WallView& wall, const PoseGrid& grid);

}  // namespace laygauge
