#pragma once

#include <opencv2/core.hpp>

namespace laygauge {

// Structuring elements of mathematical morphology, CV_8UC1, of odd side: `radius_px` to each side
// of the middle, rounded.
[[nodiscard]] cv::Mat Disk(double radius_px);
[[nodiscard]] cv::Mat Square(double radius_px);  // quicker than a disk

}  // namespace laygauge
