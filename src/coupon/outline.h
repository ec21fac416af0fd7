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

// A turn counter-clockwise as seen, in axes whose y points down.
class Turn {
 public:
  explicit Turn(double turn_deg);
  [[nodiscard]] cv::Point2d operator()(const cv::Point2d& point) const {
    return {point.x * cos_ + point.y * sin_, -point.x * sin_ + point.y * cos_};
  }

 private:
  double cos_;
  double sin_;
};

// `point` after that turn. For many points, make a Turn.
[[nodiscard]] cv::Point2d Turned(const cv::Point2d& point, double turn_deg);

// Whether the outline looks the same after a turn about its origin, within 0.2 mm.
[[nodiscard]] bool OutlineLooksTheSameTurned(const CouponDescription& coupon, double turn_deg);

// The same of the whole drawing, with its holes.
[[nodiscard]] bool LooksTheSameTurned(const CouponDescription& coupon, double turn_deg);

}  // namespace laygauge
