#pragma once

#include <opencv2/core.hpp>
#include <vector>

#include "coupon/coupon_description.h"

namespace laygauge {

// A short stretch of the coupon's outline or of a hole's edge, in the coupon's frame.
struct EdgePiece {
  std::vector<cv::Point2d> points_mm;
  std::vector<cv::Point2d> outward;  // unit normals at the points, off the material
  cv::Point2d middle_mm;
  cv::Point2d middle_outward;
  int side = 0;  // of the outline, from its first corner; holes follow
  bool is_hole = false;
  double length_mm = 0;
};

// Cuts outline and holes into pieces of about `piece_mm` with a point every `step_mm`; the corners
// of the outline, where two edges blur into one, are left out.
[[nodiscard]] std::vector<EdgePiece> CutEdges(const CouponDescription& coupon, double piece_mm,
                                              double step_mm);

// `point` turned counter-clockwise as seen, in axes whose y points down.
[[nodiscard]] cv::Point2d Turned(const cv::Point2d& point, double turn_deg);

// Whether the drawing looks the same after a turn about its origin, within 0.2 mm.
[[nodiscard]] bool LooksTheSameTurned(const CouponDescription& coupon, double turn_deg);

}  // namespace laygauge
