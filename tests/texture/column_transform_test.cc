#include "texture/column_transform.h"

#include <gtest/gtest.h>

#include <cmath>
#include <complex>
#include <numbers>
#include <stdexcept>

namespace laygauge {
namespace {

using Complex = std::complex<double>;

// Against the definition, in double precision, of noise. An error of rounding grows with the root
// of the count of stages: 2^-24 of sqrt(length) times sqrt(8) stages, four of them.
TEST(ColumnTransform, IsTheDefinition) {
  cv::RNG random(1);
  for (const int length : {2, 4, 8, 60, 96, 100, 128, 160}) {
    constexpr int kColumns = 24;  // one strip and a half
    cv::Mat re(length, kColumns, CV_32FC1);
    cv::Mat im(length, kColumns, CV_32FC1);
    random.fill(re, cv::RNG::NORMAL, 0, 1);
    random.fill(im, cv::RNG::NORMAL, 0, 1);
    const cv::Mat in_re = re.clone();
    const cv::Mat in_im = im.clone();
    const ColumnTransform transform(length);
    transform.Apply(re, im);
    for (int k = 0; k < length; ++k) {
      for (const int x : {0, 9, kColumns - 1}) {
        Complex want = 0;
        for (int n = 0; n < length; ++n) {
          want += Complex(in_re.at<float>(n, x), in_im.at<float>(n, x)) *
                  std::polar(1.0, -2 * std::numbers::pi * k * n / length);
        }
        const Complex is(re.at<float>(transform.Row(k), x), im.at<float>(transform.Row(k), x));
        ASSERT_LT(std::abs(is - want), 4 * std::sqrt(8 * length) / (1 << 24))
            << length << " " << k << " " << x;
      }
    }
  }
}

TEST(ColumnTransform, RefusesOtherPrimeFactors) {
  EXPECT_THROW(ColumnTransform(14), std::invalid_argument);
}

}  // namespace
}  // namespace laygauge
