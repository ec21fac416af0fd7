#pragma once

#include <opencv2/core.hpp>
#include <optional>
#include <string>

#include "coupon/coupon_description.h"
#include "coupon/patch.h"

namespace laygauge {

// The lines of the top layer, as the spectrum of the field shows them (line_spectrum.h).
struct Lines {
  double pitch_mm = 0;
  double lay_deg = 0;  // counter-clockwise from the coupon's +x seen from above, [0, 180)
};

// The field turned so that the lines run along the rows: columns are along the lay, rows across it.
struct AlignedField {
  cv::Mat relative;  // CV_32FC1
  cv::Mat regions;   // CV_8UC1: Region
  double px_per_mm = 20;
  cv::Matx23d coupon_from_aligned;  // pixel of this image -> mm in the coupon's frame
};

// What every metric gets: the patch, the coupon's drawing, and the lines found first.
struct Surface {
  const Patch* patch = nullptr;
  const CouponDescription* coupon = nullptr;
  std::optional<Lines> lines;  // none: no periodic lines are visible
  std::string no_lines_reason;
  // Turned to `lines`, else to the coupon's nominal lay, else to 0 degrees.
  AlignedField aligned;
};

}  // namespace laygauge
