#pragma once

#include <limits>
#include <opencv2/core.hpp>
#include <vector>

#include "coupon/coupon_description.h"

namespace laygauge {

// A point of the coupon's contour, and the unit vector from it into the material.
struct ContourPoint {
  cv::Point2d point_mm;
  cv::Point2d inward;
};

// One edge of the outline, or the whole edge of one hole.
struct Contour {
  std::vector<ContourPoint> points;  // `step_mm` apart
  double step_mm = 0;
  bool closed = false;  // a hole
};

// Points about `step_mm` apart, measured at `depth_mm` inside the material; the outline's edges
// without `corner_mm` at either end.
[[nodiscard]] std::vector<Contour> SampleContours(const CouponDescription& coupon, double step_mm,
                                                  double depth_mm, double corner_mm);

// Bilinear between pixels of a CV_32FC1; NaN beyond the outermost pixels' centres.
[[nodiscard]] inline float SampleBilinear(const cv::Mat& image, cv::Point2d pixel) {
  if (!(pixel.x >= 0 && pixel.y >= 0 && pixel.x < image.cols - 1 && pixel.y < image.rows - 1)) {
    return std::numeric_limits<float>::quiet_NaN();
  }
  const int x = static_cast<int>(pixel.x);
  const int y = static_cast<int>(pixel.y);
  const auto fx = static_cast<float>(pixel.x - x);
  const auto fy = static_cast<float>(pixel.y - y);
  const float* top = image.ptr<float>(y) + x;
  const float* bottom = image.ptr<float>(y + 1) + x;
  const float above = top[0] + fx * (top[1] - top[0]);
  const float below = bottom[0] + fx * (bottom[1] - bottom[0]);
  return above + fy * (below - above);
}

}  // namespace laygauge
