#include "texture/reduced_patch.h"

#include <algorithm>
#include <cmath>
#include <opencv2/imgproc.hpp>

namespace laygauge {

constexpr double kReducedPxPerMm = 10;

ReducedPatch::ReducedPatch(const Patch& patch) {
  const int side = std::max(1, static_cast<int>(std::lround(patch.px_per_mm / kReducedPxPerMm)));
  const cv::Size size(patch.relative.cols / side, patch.relative.rows / side);
  const cv::Rect whole(0, 0, size.width * side, size.height * side);
  cv::resize(patch.relative(whole), relative, size, 0, 0, cv::INTER_AREA);
  cv::resize(patch.regions(whole), regions, size, 0, 0, cv::INTER_NEAREST);
  px_per_mm = patch.px_per_mm / side;
  origin_px = (patch.origin_px + cv::Point2d(0.5, 0.5)) / side - cv::Point2d(0.5, 0.5);
}

}  // namespace laygauge
