#pragma once

#include <cstdint>
#include <opencv2/core.hpp>

namespace laygauge {

// Where on the coupon a pixel of a patch lies.
enum class Region : std::uint8_t {
  kOff = 0,     // outside the outline, or in a hole
  kWall = 1,    // within wall_mm of the outline or of a hole's edge
  kMargin = 2,  // between wall and field: the seam lies at its outer side
  kField = 3,   // what the metrics judge: 3 mm from the outline, 2 mm from holes (defaults)
};

// A coupon's top, rectified: the coupon's own frame (x right, y down, origin at its centre), in
// the plane of its top, at one scale. Pixel centres at whole numbers.
struct Patch {
  cv::Mat relative;  // CV_32FC1: reflectance over the field's mean; 1 is the coupon's own level
  cv::Mat regions;   // CV_8UC1: Region
  double level = 0;  // the field's mean reflectance, 1 = paper white under the same light
  double px_per_mm = 20;
  cv::Point2d origin_px;  // where the coupon's origin lies in the patch
  // The resolution that all patches are brought to: the standard deviation of the Gaussian point
  // spread that an ideal edge shows, mm. 0: not yet equalised.
  double blur_sd_mm = 0;
  // Standard deviation of what the sensor and the file add to `relative`, for one pixel. 0:
  // unknown.
  double noise_sd = 0;

  [[nodiscard]] cv::Point2d PixelFromCoupon(cv::Point2d point_mm) const {
    return point_mm * px_per_mm + origin_px;
  }
  [[nodiscard]] cv::Point2d CouponFromPixel(cv::Point2d pixel) const {
    return (pixel - origin_px) / px_per_mm;
  }
};

}  // namespace laygauge
