#pragma once

#include <opencv2/core.hpp>
#include <string>
#include <vector>

#include "coupon/coupon_description.h"
#include "coupon/patch.h"
#include "texture/metric.h"

namespace laygauge {

// The rectified coupon as a gray picture (CV_8UC1, the patch's size): sRGB-encoded so that the
// coupon's own level comes out the same middle gray for every filament and exposure.
[[nodiscard]] cv::Mat PictureOfPatch(const Patch& patch);

// The same picture for a person to judge by: all that lies more than 0.2 mm outside the coupon is
// an even dark gray, so that neither the well's printed name nor the paper's brightness is seen.
[[nodiscard]] cv::Mat PictureToJudge(const Patch& patch);

// The picture of the patch with what was found drawn on it (CV_8UC4, see png.h): outline and holes,
// the field's border, a coloured mark for each finding, below it the caption and a legend with the
// number of marks of each kind.
[[nodiscard]] cv::Mat PictureOfFindings(const Patch& patch, const CouponDescription& coupon,
                                        const std::vector<Mark>& marks,
                                        const std::vector<std::string>& caption);

}  // namespace laygauge
