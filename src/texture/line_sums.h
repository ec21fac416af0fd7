#pragma once

#include <opencv2/core.hpp>
#include <vector>

namespace laygauge {

// A straight piece of `length_px` at `direction_deg` (counter-clockwise from the rows, y up), as
// offsets of pixels from its centre: one pixel a step along the axis that it is closer to.
[[nodiscard]] std::vector<cv::Point> LineOffsets(double direction_deg, double length_px);

struct LineHit {
  cv::Point centre;
  int direction = 0;  // index
  double sigmas = 0;  // |sum| over the spread of all sums of that direction
};

struct LineSums {
  std::vector<double> directions_deg;
  // By direction: the spread of a sum over one pixel, so that n pixels have this times sqrt(n).
  std::vector<double> spread;
  std::vector<LineHit> hits;  // strongest first

  // Of any direction between the first and the last.
  [[nodiscard]] double SpreadAt(double direction_deg) const;
};

// Sums of `image` (CV_16SC1, 0 where `searched` is 0; |values| * length_px must stay below 32768)
// along all straight pieces of the given directions, centred on every searched pixel; the ones of
// at least `min_sigmas` are kept. Running sums over a sheared image: the cost a pixel and
// direction does not depend on the length. The spread is the 90 % quantile of |sum| over a normal
// variable's, so that tracks themselves do not move it.
[[nodiscard]] LineSums SumAlongLines(const cv::Mat& image, const cv::Mat& searched,
                                     const std::vector<double>& directions_deg, double length_px,
                                     double min_sigmas);

}  // namespace laygauge
