#pragma once

#include <complex>
#include <opencv2/core.hpp>
#include <vector>

namespace laygauge {

// Discrete Fourier transforms of all columns of a complex image at once, X(k) = sum of
// x(n) exp(-2 pi i k n / length): neighbouring columns are what the processor's vectors hold.
// In place, decimation in frequency, radix 4 as often as it divides the length, then 2, 3, 5.
// Source: Cooley and Tukey, "An algorithm for the machine calculation of complex Fourier series",
// Math. Comp. 19 (1965) 297-301, doi:10.1090/S0025-5718-1965-0178586-1.
class ColumnTransform {
 public:
  // Throws std::invalid_argument: a length with other prime factors than 2, 3 and 5.
  explicit ColumnTransform(int length);

  // Real and imaginary parts, CV_32FC1, `length` rows of equal strides; columns: a multiple of 8.
  void Apply(cv::Mat& re, cv::Mat& im) const;

  // The row that holds frequency `k`, 0..length - 1, afterwards.
  [[nodiscard]] int Row(int k) const { return row_of_[static_cast<std::size_t>(k)]; }

 private:
  std::size_t length_;
  std::vector<std::size_t> radices_;
  std::vector<std::complex<float>> turns_;  // exp(-2 pi i k / length)
  std::vector<int> row_of_;
};

}  // namespace laygauge
