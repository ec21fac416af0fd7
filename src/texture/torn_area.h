#pragma once

#include <opencv2/core.hpp>
#include <optional>

#include "texture/reduced_patch.h"

namespace laygauge {

struct TornAreaOptions {
  double window_mm = 2.4;      // side of the square over which directions are averaged
  double min_turn_deg = 30;    // of the lines against the coupon's lay
  double min_coherence = 0.3;  // 0: no direction, 1: one direction; of an area that is turned
  // An area without lines: less than this share of the coupon's median alignment, over twice the
  // window; judged only where that median itself is clear.
  double lost_share = 0.2;
  double clear_alignment = 0.5;
  // Root mean square, of relative reflectance smoothed to the lines: fainter textures (of an ironed
  // top, of coarse JPEG blocks) show no direction of their own. Torn areas have 0.2 and more.
  double min_gradient_per_mm = 0.06;
  double min_width_mm = 2.6;  // narrower areas are scars, blobs or chance
  void Check() const;         // throws BadOption: field, value, rule
};

// Where the top layer is torn, lifted or missing: the lines run another way than on the rest of
// the coupon (the layer below shows), or are gone although the rest has them.
struct TornArea {
  cv::Mat torn;   // CV_8UC1 in cells: 255 where the layer failed
  cv::Mat field;  // CV_8UC1 in cells: 255 on the field
  double cells_per_mm = 0;
  cv::Point2d origin_cell;  // the coupon's origin
  double area_pct = 0;      // of the field

  // A failed coupon. A clean one shows no area at all: the opening leaves nothing.
  [[nodiscard]] bool Failed() const { return area_pct >= kFailedPct; }
  static constexpr double kFailedPct = 1;
};

// The direction is that of the gradient's doubled angle, each pixel weighted by g^2/(g^2 + median),
// so that a few steep edges (scars, blobs) cannot turn an area. After Bigun and Granlund, "Optimal
// orientation detection of linear symmetry", ICCV 1987; the weighting is ours.
// `lay_deg`: of the coupon's lines; none: the surface's own prevailing direction.
[[nodiscard]] TornArea FindTornArea(const ReducedPatch& patch, std::optional<double> lay_deg,
                                    const TornAreaOptions& options = {});

}  // namespace laygauge
