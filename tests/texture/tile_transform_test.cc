#include "texture/tile_transform.h"

#include <gtest/gtest.h>

namespace laygauge {
namespace {

// Against OpenCV's transform, of noise with a mean. Both are of single precision: a millionth of
// the largest bin, as in FieldSpectrum's test against NumPy.
TEST(TileTransform, AgreesWithOpenCv) {
  cv::RNG random(2);
  for (const int side : {8, 36, 100, 128, 160}) {
    TileTransform transform(side);
    // Twice: nothing of one tile is left over for the next.
    for (int tile = 0; tile < 2; ++tile) {
      cv::Mat values(side, side, CV_32FC1);
      random.fill(values, cv::RNG::NORMAL, 0.1, 1);
      cv::Mat want;
      cv::dft(values, want, cv::DFT_COMPLEX_OUTPUT);
      want = want.colRange(0, side / 2 + 1);
      cv::Mat is;
      transform.Apply(values, is);
      ASSERT_EQ(is.size(), want.size());
      EXPECT_LT(cv::norm(is, want, cv::NORM_INF), 1e-6 * cv::norm(want, cv::NORM_INF)) << side;
    }
  }
}

}  // namespace
}  // namespace laygauge
