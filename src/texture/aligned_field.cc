#include "texture/aligned_field.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>
#include <opencv2/core/hal/intrin.hpp>
#include <opencv2/imgproc.hpp>
#include <vector>

#include "base/vectorize.h"

namespace laygauge {
namespace {

constexpr int kBorderPx = 10;  // room for filters

// Axis-parallel bounds, in the turned frame about the coupon's origin (pixels), of the field.
cv::Rect2d TurnedBounds(const cv::Mat& field, cv::Point2d origin_px, cv::Point2d along,
                        cv::Point2d across) {
  double low_u = 1e9;
  double high_u = -1e9;
  double low_v = 1e9;
  double high_v = -1e9;
  for (int y = 0; y < field.rows; ++y) {
    const auto* row = field.ptr<std::uint8_t>(y);
    const auto* first = std::find(row, row + field.cols, 255);
    if (first == row + field.cols) {
      continue;
    }
    const auto* last = row + field.cols - 1;
    while (*last != 255) {
      --last;
    }
    for (const auto* end : {first, last}) {
      const cv::Point2d p = cv::Point2d(static_cast<double>(end - row), y) - origin_px;
      low_u = std::min(low_u, p.dot(along));
      high_u = std::max(high_u, p.dot(along));
      low_v = std::min(low_v, p.dot(across));
      high_v = std::max(high_v, p.dot(across));
    }
  }
  return {low_u, low_v, high_u - low_u, high_v - low_v};
}

constexpr int kSteps = 64;  // of a pixel
using Kernel = std::array<float, 4>;

// Keys' kernel, a = -1/2, for the pixels -1, 0, 1, 2 about a fraction of a pixel.
std::array<Kernel, kSteps> CubicKernels() {
  std::array<Kernel, kSteps> kernels{};
  for (int step = 0; step < kSteps; ++step) {
    const double t = static_cast<double>(step) / kSteps;
    kernels[step] = {static_cast<float>(0.5 * (-t * t * t + 2 * t * t - t)),
                     static_cast<float>(0.5 * (3 * t * t * t - 5 * t * t + 2)),
                     static_cast<float>(0.5 * (-3 * t * t * t + 4 * t * t + t)),
                     static_cast<float>(0.5 * (t * t * t - t * t))};
  }
  return kernels;
}

// Where a straight walk start + u * step, u = 0..count - 1, lies inside a rectangle of pixels.
struct Span {
  int begin = 0;
  int end = 0;
};

Span InsideSpan(cv::Point2d start, cv::Point2d step, int count, cv::Rect2d inside) {
  double low = 0;
  double high = count - 1;
  const auto clip = [&](double at, double by, double first, double last) {
    if (std::abs(by) < 1e-12) {
      high = at < first || at > last ? -1 : high;
      return;
    }
    low = std::max(low, std::min((first - at) / by, (last - at) / by));
    high = std::min(high, std::max((first - at) / by, (last - at) / by));
  };
  clip(start.x, step.x, inside.x, inside.br().x);
  clip(start.y, step.y, inside.y, inside.br().y);
  const int begin = static_cast<int>(std::ceil(low));
  return {std::min(begin, count),
          std::clamp(static_cast<int>(std::floor(high)) + 1, std::min(begin, count), count)};
}

// The weighted sums of four columns; `row`: the pixel before and above the point.
cv::v_float32x4 Products(const float* row, std::size_t stride, const Kernel& across,
                         const Kernel& down) {
  cv::v_float32x4 sum = cv::v_load(row) * cv::v_setall_f32(down[0]);
  sum += cv::v_load(row + stride) * cv::v_setall_f32(down[1]);
  sum += cv::v_load(row + 2 * stride) * cv::v_setall_f32(down[2]);
  sum += cv::v_load(row + 3 * stride) * cv::v_setall_f32(down[3]);
  return sum * cv::v_load(across.data());
}

constexpr double kOne = 1 << 16;  // a step in the fixed point of a walk

// A walk over the patch that makes one row of the turned field: pixels `span` of it.
struct Walk {
  Span span;
  std::int64_t x = 0;  // at the row's first pixel, with half a step added so that shifting rounds
  std::int64_t y = 0;
  std::int64_t step_x = 0;
  std::int64_t step_y = 0;
};

Walk MakeWalk(cv::Point2d start, cv::Point2d step, Span span) {
  const auto fixed = [](double v) {
    return static_cast<std::int64_t>(std::llround(v * kSteps * kOne));
  };
  Walk walk{span, 0, 0, fixed(step.x), fixed(step.y)};
  walk.x = fixed(start.x + span.begin * step.x) + (1 << 15) - span.begin * walk.step_x;
  walk.y = fixed(start.y + span.begin * step.y) + (1 << 15) - span.begin * walk.step_y;
  return walk;
}

// Pixels [begin, end) of a row of the turned field; 1 and kOff beyond the walk's span.
LAYGAUGE_WIDE_VECTORS
void SampleWalk(const Patch& patch, const Walk& walk, int begin, int end, float* relative,
                std::uint8_t* regions) {
  static const std::array<Kernel, kSteps> kernels = CubicKernels();
  const std::size_t stride = patch.relative.step1();
  const std::size_t region_stride = patch.regions.step1();
  const auto* source = patch.relative.ptr<float>();
  const auto* source_regions = patch.regions.ptr<std::uint8_t>();
  const int first = std::clamp(walk.span.begin, begin, end);
  const int last = std::clamp(walk.span.end, first, end);
  // Local, so that no writing to `regions` can change them.
  std::int64_t at_x = walk.x + first * walk.step_x;
  std::int64_t at_y = walk.y + first * walk.step_y;
  const std::int64_t step_x = walk.step_x;
  const std::int64_t step_y = walk.step_y;
  const auto sample = [&](int u) {
    const auto sx = static_cast<std::size_t>(at_x >> 16);
    const auto sy = static_cast<std::size_t>(at_y >> 16);
    at_x += step_x;
    at_y += step_y;
    regions[u] =
        source_regions[(sy + kSteps / 2) / kSteps * region_stride + (sx + kSteps / 2) / kSteps];
    return Products(source + (sy / kSteps - 1) * stride + sx / kSteps - 1, stride,
                    kernels[sx % kSteps], kernels[sy % kSteps]);
  };
  std::fill(relative + begin, relative + first, 1.0F);
  std::fill(relative + last, relative + end, 1.0F);
  std::fill(regions + begin, regions + first, static_cast<std::uint8_t>(Region::kOff));
  std::fill(regions + last, regions + end, static_cast<std::uint8_t>(Region::kOff));
  int u = first;
  for (; u + 4 <= last; u += 4) {
    const cv::v_float32x4 sums[4] = {sample(u), sample(u + 1), sample(u + 2), sample(u + 3)};
    cv::v_store(relative + u, cv::v_reduce_sum4(sums[0], sums[1], sums[2], sums[3]));
  }
  for (; u < last; ++u) relative[u] = cv::v_reduce_sum(sample(u));
}

// Square by square: however the field is turned, a square's source stays in the cache.
void SampleSquares(const Patch& patch, const std::vector<Walk>& walks, AlignedField& aligned) {
  constexpr int kSquare = 64;
  const cv::Size size = aligned.relative.size();
  for (int top = 0; top < size.height; top += kSquare) {
    for (int left = 0; left < size.width; left += kSquare) {
      for (int v = top; v < std::min(top + kSquare, size.height); ++v) {
        SampleWalk(patch, walks[static_cast<std::size_t>(v)], left,
                   std::min(left + kSquare, size.width), aligned.relative.ptr<float>(v),
                   aligned.regions.ptr<std::uint8_t>(v));
      }
    }
  }
}

LAYGAUGE_WIDE_VECTORS
void MeansOfFour(const float* top, const float* low, int cols, float* __restrict out) {
  for (int x = 0; x < cols; ++x) {
    out[x] = 0.25F * (top[2 * x] + top[2 * x + 1] + low[2 * x] + low[2 * x + 1]);
  }
}

LAYGAUGE_WIDE_VECTORS
void LowestOfFour(const std::uint8_t* top, const std::uint8_t* low, int cols,
                  std::uint8_t* __restrict out) {
  for (int x = 0; x < cols; ++x) {
    out[x] = std::min(std::min(top[2 * x], top[2 * x + 1]), std::min(low[2 * x], low[2 * x + 1]));
  }
}

}  // namespace

AlignedField AlignField(const Patch& patch, double lay_deg) {
  const double lay = lay_deg * std::numbers::pi / 180;
  const cv::Point2d along(std::cos(lay), -std::sin(lay));
  const cv::Point2d across(std::sin(lay), std::cos(lay));
  const cv::Mat field = patch.regions == static_cast<int>(Region::kField);
  AlignedField aligned;
  aligned.px_per_mm = patch.px_per_mm;
  const cv::Rect box = cv::boundingRect(field);
  if (box.empty()) {
    return aligned;
  }
  const cv::Rect2d bounds = TurnedBounds(field, patch.origin_px, along, across);
  const double u0 = std::floor(bounds.x - kBorderPx);
  const double v0 = std::floor(bounds.y - kBorderPx);
  const cv::Size size(static_cast<int>(bounds.width + 2 * kBorderPx) + 2,
                      static_cast<int>(bounds.height + 2 * kBorderPx) + 2);
  const cv::Point2d start = along * u0 + across * v0 + patch.origin_px;
  aligned.relative.create(size, CV_32FC1);
  aligned.regions.create(size, CV_8UC1);
  // The field and its border, as far as the kernel finds pixels: one before, two after.
  const cv::Rect2d inside =
      cv::Rect2d(box.x - kBorderPx, box.y - kBorderPx, box.width - 1 + 2 * kBorderPx,
                 box.height - 1 + 2 * kBorderPx) &
      cv::Rect2d(1, 1, patch.relative.cols - 4, patch.relative.rows - 4);
  std::vector<Walk> walks;
  for (int v = 0; v < size.height; ++v) {
    const cv::Point2d row_start = start + v * across;
    walks.push_back(MakeWalk(row_start, along, InsideSpan(row_start, along, size.width, inside)));
  }
  SampleSquares(patch, walks, aligned);
  const double mm = 1 / patch.px_per_mm;
  const cv::Point2d start_mm = patch.CouponFromPixel(start);
  aligned.coupon_from_aligned = {along.x * mm, across.x * mm, start_mm.x,  //
                                 along.y * mm, across.y * mm, start_mm.y};
  return aligned;
}

AlignedField HalveField(const AlignedField& field) {
  AlignedField half;
  half.px_per_mm = field.px_per_mm / 2;
  const int rows = field.relative.rows / 2;
  const int cols = field.relative.cols / 2;
  half.relative.create(rows, cols, CV_32FC1);
  half.regions.create(rows, cols, CV_8UC1);
  for (int y = 0; y < rows; ++y) {
    MeansOfFour(field.relative.ptr<float>(2 * y), field.relative.ptr<float>(2 * y + 1), cols,
                half.relative.ptr<float>(y));
    LowestOfFour(field.regions.ptr<std::uint8_t>(2 * y), field.regions.ptr<std::uint8_t>(2 * y + 1),
                 cols, half.regions.ptr<std::uint8_t>(y));
  }
  // The centre of pixel (0, 0) lies at (0.5, 0.5) of the finer image.
  const cv::Matx23d& m = field.coupon_from_aligned;
  half.coupon_from_aligned = {2 * m(0, 0), 2 * m(0, 1), m(0, 2) + 0.5 * (m(0, 0) + m(0, 1)),  //
                              2 * m(1, 0), 2 * m(1, 1), m(1, 2) + 0.5 * (m(1, 0) + m(1, 1))};
  return half;
}

}  // namespace laygauge
