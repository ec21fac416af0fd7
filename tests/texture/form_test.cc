#include "texture/form.h"

#include <gtest/gtest.h>

#include <cmath>

namespace laygauge {
namespace {

cv::Mat Paraboloid(int rows, int cols) {
  cv::Mat image(rows, cols, CV_32FC1);
  for (int y = 0; y < rows; ++y) {
    for (int x = 0; x < cols; ++x) {
      image.at<float>(y, x) =
          static_cast<float>(1 + 2e-3 * x - 1e-3 * y + 4e-5 * x * x + 3e-5 * x * y - 2e-5 * y * y);
    }
  }
  return image;
}

// A polynomial of second order is its own best fit: single precision is left.
TEST(RemoveForm, LeavesNothingOfAParaboloid) {
  for (const int step : {1, 4}) {
    cv::Mat image = Paraboloid(90, 120);
    RemoveForm(image, cv::Mat(image.size(), CV_8UC1, cv::Scalar(255)), step);
    EXPECT_LT(cv::norm(image, cv::NORM_INF), 2e-6) << step;
  }
}

// What has no weight may hold anything, and the form still goes there.
TEST(RemoveForm, FitsOnlyWhatHasWeight) {
  cv::Mat image = Paraboloid(90, 120);
  cv::Mat weights(image.size(), CV_32FC1, cv::Scalar(0.5));
  const cv::Rect off(40, 20, 30, 30);
  weights(off).setTo(0);
  image(off) += 7;
  RemoveForm(image, weights);
  image(off) -= 7;
  EXPECT_LT(cv::norm(image, cv::NORM_INF), 4e-6);
}

// A fine wave is no form: twenty whole periods keep their root mean square, 1 / sqrt 2, but for
// what a parabola follows of them, less than a hundredth.
TEST(RemoveForm, KeepsFineWaves) {
  cv::Mat image(100, 200, CV_32FC1);
  for (int y = 0; y < image.rows; ++y) {
    for (int x = 0; x < image.cols; ++x) {
      image.at<float>(y, x) = static_cast<float>(std::cos(2 * CV_PI * x / 10));
    }
  }
  RemoveForm(image, cv::Mat(image.size(), CV_8UC1, cv::Scalar(1)));
  EXPECT_NEAR(cv::norm(image) / std::sqrt(image.total()), std::sqrt(0.5), 0.007);
}

}  // namespace
}  // namespace laygauge
