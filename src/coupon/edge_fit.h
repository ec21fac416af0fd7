#pragma once

#include <opencv2/core.hpp>
#include <vector>

#include "coupon/edge_search.h"
#include "coupon/outline.h"

namespace laygauge {

struct EdgeFit {
  Pose pose;
  double center_sd_mm = 0;
  double turn_sd_deg = 0;
  // How far the visible edges lie inward of the drawing's: a bead's edge is rounded, a print
  // shrinks. Fitted, so that neither moves the centre.
  double outline_inset_mm = 0;
  double hole_inset_mm = 0;
  double residual_mm = 0;   // weighted root mean square of what the fit leaves
  double matched_mm = 0;    // length of edges that the fit rests on, weighed
  double outline_seen = 0;  // share of the outline's length on which an edge lies where it should
  double holes_seen = 0;    // the same of the worst hole; 0 without holes
};

// Sub-pixel pose by robust least squares from `starts`, at least one of which must be right to
// about 0.3 mm; they lie as close to one another. The fit that more edges agree with is taken.
//
// Across each piece a brightness profile, averaged along the piece, is taken; the edges in it are
// the extremes of its slope. Each is compared with where the top's edge should be and, on sides
// on which the camera sees the wall, with where the wall's foot should be: on the wall's side the
// foot often is the only edge there is (black on black). The weights fall with distance
// (Welsch's function), whose width shrinks from round to round.
[[nodiscard]] EdgeFit FitEdges(const cv::Mat& picture, double px_per_mm,
                               const cv::Point2d& origin_px, const CouponDescription& coupon,
                               const WallView& wall, const std::vector<Pose>& starts);

}  // namespace laygauge
