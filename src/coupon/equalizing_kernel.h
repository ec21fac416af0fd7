#pragma once

#include <functional>
#include <opencv2/core.hpp>
#include <vector>

#include "sheet/edge_sharpness.h"

namespace laygauge {

// A linear filter as a sum of separable ones: each a column filter times a row filter.
struct SeparableFilter {
  struct Term {
    cv::Mat column;  // CV_32FC1, n x 1, n odd; the weight is in here
    cv::Mat row;     // CV_32FC1, n x 1, n odd
  };
  std::vector<Term> terms;

  // CV_32FC1 to CV_32FC1 of the same size; mirrored at the borders. `finished` is called with each
  // row and its number as long as it is in the cache.
  [[nodiscard]] cv::Mat Apply(
      const cv::Mat& image,
      const std::function<void(const float* row, int y)>& finished = {}) const;
};

// The filter that turns a point spread into a Gaussian of working_sd_mm. With the spread's
// modulation M = S (1 + a - a H), S of its blur, H of its halo, and the Gaussian's T, its transfer
// is
//   T / M = (T / S) / (1 + a (1 - H)),
// which damps every frequency while the blur is below working_sd_mm; beyond, it amplifies (noise
// too), by max_gain at most. T / S is separable. The rest is taken as c + (1 - c) H^p, with c and p
// fitted: within 0.005 of contrast up to a = 0.65, 0.012 up to 1. So there are two terms, one
// without sharpening. Taps by least squares on the transfer, as many as bring the contrast of
// whatever the photo shows within 0.002.
[[nodiscard]] SeparableFilter DesignEqualizer(const LocalSpread& spread, double samples_per_mm,
                                              double working_sd_mm, double max_gain);

}  // namespace laygauge
