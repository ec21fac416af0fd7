#pragma once

#include <opencv2/core.hpp>

#include "coupon/patch.h"

namespace laygauge {

// The field turned so that the lines run along the rows: columns are along the lay, rows across it.
struct AlignedField {
  cv::Mat relative;  // CV_32FC1
  cv::Mat regions;   // CV_8UC1: Region; kOff beyond the field's border
  double px_per_mm = 20;
  cv::Matx23d coupon_from_aligned;  // pixel of this image -> mm in the coupon's frame
};

// The field with a border of half a millimetre (at 20 px/mm), turned about the coupon's origin so
// that the direction `lay_deg` lies along the rows. Bicubic between pixels; regions take their
// nearest pixel. Beyond the border: 1 and kOff.
// Source: Keys, "Cubic convolution interpolation for digital image processing", IEEE Trans. ASSP 29
// (1981) 1153-1160, doi:10.1109/TASSP.1981.1163711 (a = -1/2).
[[nodiscard]] AlignedField AlignField(const Patch& patch, double lay_deg);

// Means of 2 x 2 pixels; a pixel keeps the lowest region of its four (Region's order).
[[nodiscard]] AlignedField HalveField(const AlignedField& field);

}  // namespace laygauge
