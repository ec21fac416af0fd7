#include "texture/structuring_element.h"

#include <cmath>
#include <opencv2/imgproc.hpp>

namespace laygauge {
namespace {

int Side(double radius_px) { return 2 * static_cast<int>(std::lround(radius_px)) + 1; }

}  // namespace

cv::Mat Disk(double radius_px) {
  const int side = Side(radius_px);
  return cv::getStructuringElement(cv::MORPH_ELLIPSE, {side, side});
}

cv::Mat Square(double radius_px) {
  const int side = Side(radius_px);
  return cv::Mat::ones(side, side, CV_8UC1);
}

}  // namespace laygauge
