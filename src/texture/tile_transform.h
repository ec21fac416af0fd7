#pragma once

#include <opencv2/core.hpp>

#include "texture/column_transform.h"

namespace laygauge {

// The two-dimensional discrete Fourier transform of square tiles of one side.
class TileTransform {
 public:
  // Even, with no other prime factors than 2, 3 and 5.
  explicit TileTransform(int side);

  // `values`: CV_32FC1, side x side. `spectrum`: CV_32FC2, side x (side / 2 + 1), real and
  // imaginary part of frequency (kx, ky) at row ky, column kx; the other half is its conjugate.
  void Apply(const cv::Mat& values, cv::Mat& spectrum);

 private:
  int side_;
  ColumnTransform transform_;
  // Between the steps: rows x (then their frequency kx), columns y; then the turned picture.
  cv::Mat packed_re_, packed_im_;
  cv::Mat by_kx_re_, by_kx_im_;
  cv::Mat by_y_re_, by_y_im_;
};

}  // namespace laygauge
