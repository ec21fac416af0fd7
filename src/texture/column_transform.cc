#include "texture/column_transform.h"

#include <fmt/format.h>

#include <algorithm>
#include <numbers>
#include <stdexcept>

#include "base/vectorize.h"

namespace laygauge {
namespace {

constexpr int kWide = 8;
constexpr int kStripColumns = 16;  // so few that all their rows stay in the first cache

// Some columns of a complex image.
struct Strip {
  float* re = nullptr;
  float* im = nullptr;
  std::size_t stride = 0;
  std::size_t columns = 0;  // a multiple of kWide
};

// A stage turns each block of `block` rows into `radix` blocks of a part of it: from the rows j of
// its parts, x(q), it makes those of the new ones, turn(j k) * sum of x(q) exp(-2 pi i q k /
// radix).
struct Stage {
  std::size_t length = 0;
  std::size_t block = 0;
  std::size_t radix = 0;
  const std::complex<float>* turns = nullptr;  // of the whole length
  std::size_t turn_step = 0;                   // length / block

  [[nodiscard]] std::size_t Part() const { return block / radix; }
  [[nodiscard]] std::complex<float> Turn(std::size_t i) const { return turns[i * turn_step]; }
};

LAYGAUGE_WIDE_VECTORS
void ApplyFour(const Strip& strip, const Stage& stage) {
  const std::size_t part = stage.Part() * strip.stride;
  for (std::size_t first = 0; first < stage.length; first += stage.block) {
    for (std::size_t j = 0; j < stage.Part(); ++j) {
      const std::complex<float> turn1 = stage.Turn(j);
      const std::complex<float> turn2 = stage.Turn(2 * j);
      const std::complex<float> turn3 = stage.Turn(3 * j);
      float* re = strip.re + (first + j) * strip.stride;
      float* im = strip.im + (first + j) * strip.stride;
      for (std::size_t x = 0; x < strip.columns; x += kWide, re += kWide, im += kWide) {
        const EightFloats even_re = *EightAt(re) + *EightAt(re + 2 * part);
        const EightFloats even_im = *EightAt(im) + *EightAt(im + 2 * part);
        const EightFloats odd_re = *EightAt(re + part) + *EightAt(re + 3 * part);
        const EightFloats odd_im = *EightAt(im + part) + *EightAt(im + 3 * part);
        const EightFloats fall_re = *EightAt(re) - *EightAt(re + 2 * part);
        const EightFloats fall_im = *EightAt(im) - *EightAt(im + 2 * part);
        // -i times the difference
        const EightFloats side_re = *EightAt(im + part) - *EightAt(im + 3 * part);
        const EightFloats side_im = *EightAt(re + 3 * part) - *EightAt(re + part);
        *EightAt(re) = even_re + odd_re;
        *EightAt(im) = even_im + odd_im;
        const EightFloats re1 = fall_re + side_re;
        const EightFloats im1 = fall_im + side_im;
        *EightAt(re + part) = turn1.real() * re1 - turn1.imag() * im1;
        *EightAt(im + part) = turn1.real() * im1 + turn1.imag() * re1;
        const EightFloats re2 = even_re - odd_re;
        const EightFloats im2 = even_im - odd_im;
        *EightAt(re + 2 * part) = turn2.real() * re2 - turn2.imag() * im2;
        *EightAt(im + 2 * part) = turn2.real() * im2 + turn2.imag() * re2;
        const EightFloats re3 = fall_re - side_re;
        const EightFloats im3 = fall_im - side_im;
        *EightAt(re + 3 * part) = turn3.real() * re3 - turn3.imag() * im3;
        *EightAt(im + 3 * part) = turn3.real() * im3 + turn3.imag() * re3;
      }
    }
  }
}

LAYGAUGE_WIDE_VECTORS
void ApplyTwo(const Strip& strip, const Stage& stage) {
  const std::size_t part = stage.Part() * strip.stride;
  for (std::size_t first = 0; first < stage.length; first += stage.block) {
    for (std::size_t j = 0; j < stage.Part(); ++j) {
      const std::complex<float> turn = stage.Turn(j);
      float* re = strip.re + (first + j) * strip.stride;
      float* im = strip.im + (first + j) * strip.stride;
      for (std::size_t x = 0; x < strip.columns; x += kWide, re += kWide, im += kWide) {
        const EightFloats fall_re = *EightAt(re) - *EightAt(re + part);
        const EightFloats fall_im = *EightAt(im) - *EightAt(im + part);
        *EightAt(re) += *EightAt(re + part);
        *EightAt(im) += *EightAt(im + part);
        *EightAt(re + part) = turn.real() * fall_re - turn.imag() * fall_im;
        *EightAt(im + part) = turn.real() * fall_im + turn.imag() * fall_re;
      }
    }
  }
}

// Of radix 3 or 5, for sides that are no powers of two.
LAYGAUGE_WIDE_VECTORS
void ApplyOdd(const Strip& strip, const Stage& stage) {
  constexpr std::size_t kMost = 5;
  const std::size_t part = stage.Part() * strip.stride;
  for (std::size_t first = 0; first < stage.length; first += stage.block) {
    for (std::size_t j = 0; j < stage.Part(); ++j) {
      float* re = strip.re + (first + j) * strip.stride;
      float* im = strip.im + (first + j) * strip.stride;
      for (std::size_t x = 0; x < strip.columns; x += kWide, re += kWide, im += kWide) {
        EightFloats in_re[kMost];
        EightFloats in_im[kMost];
        for (std::size_t q = 0; q < stage.radix; ++q) {
          in_re[q] = *EightAt(re + q * part);
          in_im[q] = *EightAt(im + q * part);
        }
        for (std::size_t k = 0; k < stage.radix; ++k) {
          EightFloats sum_re = {};
          EightFloats sum_im = {};
          for (std::size_t q = 0; q < stage.radix; ++q) {
            const std::size_t turns = j * k * stage.turn_step + q * k * stage.length / stage.radix;
            const std::complex<float> turn = stage.turns[turns % stage.length];
            sum_re += turn.real() * in_re[q] - turn.imag() * in_im[q];
            sum_im += turn.real() * in_im[q] + turn.imag() * in_re[q];
          }
          *EightAt(re + k * part) = sum_re;
          *EightAt(im + k * part) = sum_im;
        }
      }
    }
  }
}

// Radices of the stages, in their order.
std::vector<std::size_t> Factors(std::size_t length) {
  std::vector<std::size_t> factors;
  std::size_t rest = length;
  for (const std::size_t radix : {4, 2, 3, 5}) {
    for (; rest % radix == 0; rest /= radix) factors.push_back(radix);
  }
  if (rest != 1) {
    throw std::invalid_argument(
        fmt::format("a transform of {} values: only factors 2, 3 and 5 are handled", length));
  }
  return factors;
}

}  // namespace

ColumnTransform::ColumnTransform(int length)
    : length_(static_cast<std::size_t>(length)), radices_(Factors(length_)) {
  for (std::size_t k = 0; k < length_; ++k) {
    const double turn = -2 * std::numbers::pi * static_cast<double>(k) / length;
    turns_.emplace_back(std::polar(1.0, turn));
    // A frequency k = a + radix * rest goes to the a-th block, and there where `rest` does.
    std::size_t row = 0;
    std::size_t rest = k;
    std::size_t block = length_;
    for (const std::size_t radix : radices_) {
      block /= radix;
      row += rest % radix * block;
      rest /= radix;
    }
    row_of_.push_back(static_cast<int>(row));
  }
}

void ColumnTransform::Apply(cv::Mat& re, cv::Mat& im) const {
  for (int x = 0; x < re.cols; x += kStripColumns) {
    const Strip strip{re.ptr<float>() + x, im.ptr<float>() + x, re.step1(),
                      static_cast<std::size_t>(std::min(kStripColumns, re.cols - x))};
    std::size_t block = length_;
    for (const std::size_t radix : radices_) {
      const Stage stage{length_, block, radix, turns_.data(), length_ / block};
      radix == 4   ? ApplyFour(strip, stage)
      : radix == 2 ? ApplyTwo(strip, stage)
                   : ApplyOdd(strip, stage);
      block /= radix;
    }
  }
}

}  // namespace laygauge
