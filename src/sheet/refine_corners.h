#pragma once

#include <Eigen/Core>
#include <array>
#include <opencv2/core.hpp>
#include <optional>

namespace laygauge {

// Corners of a marker's outer black square, pixels, in the order of the drawing read upright:
// top left, top right, bottom right, bottom left.
using SquareCorners = std::array<Eigen::Vector2d, 4>;

struct RefineCornersOptions {
  // How far to either side of the rough side its edge is sought, as a share of the side's length:
  // first, and once it is nearly known. A marker's border is an eighth wide: beyond that a profile
  // meets the code's cells.
  double first_reach = 0.1;
  double reach = 0.06;
  int most_profiles = 64;       // a side
  double least_contrast = 0.1;  // (paper - ink) / paper, linear light
  double most_scatter_px = 1;   // of a side's edge points round its line, standard deviation

  void Check() const;  // throws BadOption: field, value, rule
};

struct RefinedCorners {
  SquareCorners corners_px;
  double scatter_px = 0;  // root mean square of the edge points round the sides' lines
};

// Fits a straight line to each side of a black square on white paper, and intersects neighbours.
// An edge point is where a profile across the side crosses half way between ink and paper: in
// linear light, where a symmetric blur leaves that point in place. `light`: CV_32FC1 linear light
// of the photograph's part whose first pixel is `origin_px`; `rough_px`: corners good to about a
// twentieth of a side, in the photograph's pixels. Nothing if a side has too little contrast, is
// not straight, or leaves the part.
[[nodiscard]] std::optional<RefinedCorners> RefineCorners(const cv::Mat& light, cv::Point origin_px,
                                                          const SquareCorners& rough_px,
                                                          const RefineCornersOptions& options = {});

}  // namespace laygauge
