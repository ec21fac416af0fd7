#pragma once

#include <opencv2/core.hpp>
#include <string>

namespace laygauge {

// A PNG file's bytes. `image`: CV_8UC1 gray, or CV_8UC4 as Cairo lays out CAIRO_FORMAT_RGB24
// (bytes blue, green, red, unused). Fast rather than small. `px_per_mm` is written as the picture's
// physical scale (pHYs) where it is positive.
[[nodiscard]] std::string EncodePng(const cv::Mat& image, double px_per_mm);

}  // namespace laygauge
