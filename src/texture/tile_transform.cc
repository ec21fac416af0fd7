#include "texture/tile_transform.h"

#include "base/vectorize.h"

namespace laygauge {
namespace {

int RoundUpToEight(int count) { return (count + 7) / 8 * 8; }

// to(x, y) = from(y, x); `to` may be wider.
void Transpose(const cv::Mat& from, cv::Mat& to) {
  cv::Mat part = to.colRange(0, from.rows);
  cv::transpose(from, part);
}

// The columns' transforms of two real pictures, a and b, were made as one of a + i b: from the rows
// of a frequency and of its negative, those of a and of b side by side.
LAYGAUGE_WIDE_VECTORS
void Unpack(const float* re, const float* im, const float* re_of_negative,
            const float* im_of_negative, int half, float* out_re, float* out_im) {
  for (int y = 0; y < half; ++y) {
    out_re[y] = 0.5F * (re[y] + re_of_negative[y]);
    out_im[y] = 0.5F * (im[y] - im_of_negative[y]);
    out_re[y + half] = 0.5F * (im[y] + im_of_negative[y]);
    out_im[y + half] = 0.5F * (re_of_negative[y] - re[y]);
  }
}

LAYGAUGE_WIDE_VECTORS
void Interleave(const float* re, const float* im, int count, float* __restrict out) {
  for (int x = 0; x < count; ++x) {
    out[2 * x] = re[x];
    out[2 * x + 1] = im[x];
  }
}

}  // namespace

TileTransform::TileTransform(int side) : side_(side), transform_(side) {
  const int half = side / 2;
  for (cv::Mat* m : {&packed_re_, &packed_im_}) {
    *m = cv::Mat::zeros(side, RoundUpToEight(half), CV_32FC1);
  }
  for (cv::Mat* m : {&by_kx_re_, &by_kx_im_}) m->create(half + 1, side, CV_32FC1);
  for (cv::Mat* m : {&by_y_re_, &by_y_im_}) {
    *m = cv::Mat::zeros(side, RoundUpToEight(half + 1), CV_32FC1);
  }
}

void TileTransform::Apply(const cv::Mat& values, cv::Mat& spectrum) {
  const int half = side_ / 2;
  Transpose(values.rowRange(0, half), packed_re_);
  Transpose(values.rowRange(half, side_), packed_im_);
  transform_.Apply(packed_re_, packed_im_);
  for (int kx = 0; kx <= half; ++kx) {
    const int row = transform_.Row(kx);
    const int of_negative = transform_.Row((side_ - kx) % side_);
    Unpack(packed_re_.ptr<float>(row), packed_im_.ptr<float>(row),
           packed_re_.ptr<float>(of_negative), packed_im_.ptr<float>(of_negative), half,
           by_kx_re_.ptr<float>(kx), by_kx_im_.ptr<float>(kx));
  }
  Transpose(by_kx_re_, by_y_re_);
  Transpose(by_kx_im_, by_y_im_);
  transform_.Apply(by_y_re_, by_y_im_);
  spectrum.create(side_, half + 1, CV_32FC2);
  for (int ky = 0; ky < side_; ++ky) {
    const auto* re = by_y_re_.ptr<float>(transform_.Row(ky));
    const auto* im = by_y_im_.ptr<float>(transform_.Row(ky));
    Interleave(re, im, half + 1, spectrum.ptr<float>(ky));
  }
}

}  // namespace laygauge
