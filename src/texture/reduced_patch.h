#pragma once

#include <opencv2/core.hpp>

#include "coupon/patch.h"

namespace laygauge {

// A patch at about 10 px/mm, for what is looked for on the whole top: means of squares of pixels.
struct ReducedPatch {
  explicit ReducedPatch(const Patch& patch);

  cv::Mat relative;  // CV_32FC1
  cv::Mat regions;   // CV_8UC1: Region, of a square's first pixel
  double px_per_mm = 0;
  cv::Point2d origin_px;  // the coupon's origin
};

}  // namespace laygauge
