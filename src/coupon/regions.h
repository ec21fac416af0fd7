#pragma once

#include <opencv2/core.hpp>

#include "coupon/coupon_description.h"
#include "coupon/patch.h"

namespace laygauge {

struct RegionOptions {
  double px_per_mm = 20;
  double border_mm = 2;              // the patch reaches this far beyond the outline's bounds
  double field_from_outline_mm = 3;  // the field keeps off the outline...
  double field_from_hole_mm = 2;     // ...and off the holes' edges by more than this
  void Check() const;                // throws BadOption
};

// Where on the coupon each pixel of its patch lies: a mask, not a crop. Made once per coupon and
// scale, shared by all patches of a run.
struct CouponRegions {
  double px_per_mm = 20;
  cv::Point2d origin_px;  // where the coupon's origin lies in the patch
  cv::Mat regions;        // CV_8UC1: Region
  int field_pixels = 0;
};

// By the distances of each pixel's centre from the outline and from the holes, in closed form. A
// pixel belongs to the wall up to and with wall_mm, to the field only beyond the options' lengths.
[[nodiscard]] CouponRegions MakeRegions(const CouponDescription& coupon,
                                        const RegionOptions& options);

}  // namespace laygauge
