#pragma once

#include <opencv2/core.hpp>

namespace laygauge {

// Turns and mirrors stored pixels so that they are seen as taken. `orientation`: EXIF tag 0x0112,
// 1..8 (JEITA CP-3451, section 4.6.4); 1 returns `stored` itself.
[[nodiscard]] cv::Mat Upright(cv::Mat stored, int orientation);

}  // namespace laygauge
