#include "coupon/rectify.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <cstring>
#include <opencv2/core/hal/intrin.hpp>
#include <opencv2/imgproc.hpp>
#include <vector>

#include "base/vectorize.h"

namespace laygauge {
namespace {

constexpr int kNodeStep_px = kStretch_px;
constexpr int kPhases = 512;  // a sample's position is rounded to 1/512 px

// The photo's pixels at the frame's nodes, kNodeStep_px apart.
struct NodeMap {
  int columns = 0;
  int rows = 0;
  std::vector<cv::Point2f> photo_px;  // relative to the source region's corner

  [[nodiscard]] const cv::Point2f& At(int column, int row) const {
    return photo_px[static_cast<size_t>(row) * columns + column];
  }
};

NodeMap MapNodes(const View& view, const PlaneFrame& frame) {
  NodeMap map;
  map.columns = (frame.size_px.width + kNodeStep_px - 1) / kNodeStep_px + 1;
  map.rows = (frame.size_px.height + kNodeStep_px - 1) / kNodeStep_px + 1;
  for (int r = 0; r < map.rows; ++r) {
    for (int c = 0; c < map.columns; ++c) {
      const cv::Point2d sheet_mm = frame.SheetFromFrame(
          {static_cast<double>(c * kNodeStep_px), static_cast<double>(r * kNodeStep_px)});
      const Eigen::Vector2d pixel = view.PixelFromSheet(sheet_mm.x, sheet_mm.y, frame.height_mm);
      map.photo_px.emplace_back(static_cast<float>(pixel.x()), static_cast<float>(pixel.y()));
    }
  }
  return map;
}

// The part of the photo that the nodes span, with `border_px` more; at least one pixel.
cv::Rect SourceRegion(const NodeMap& map, const cv::Size& photo_size, int border_px) {
  float left = INFINITY;
  float top = INFINITY;
  float right = -INFINITY;
  float bottom = -INFINITY;
  for (const cv::Point2f& p : map.photo_px) {
    left = std::min(left, p.x);
    right = std::max(right, p.x);
    top = std::min(top, p.y);
    bottom = std::max(bottom, p.y);
  }
  const auto clamped = [](float value, int last) {
    return static_cast<int>(std::clamp(value, 0.F, static_cast<float>(last)));
  };
  const int x0 = clamped(std::floor(left) - border_px, photo_size.width - 1);
  const int y0 = clamped(std::floor(top) - border_px, photo_size.height - 1);
  const int x1 = clamped(std::ceil(right) + border_px, photo_size.width - 1);
  const int y1 = clamped(std::ceil(bottom) + border_px, photo_size.height - 1);
  return {x0, y0, x1 - x0 + 1, y1 - y0 + 1};
}

// In place, along columns, for all columns at once: the recursive filter that turns samples into
// the coefficients of the cubic spline through them (Unser 1999, box 2), mirrored at the ends.
LAYGAUGE_WIDE_VECTORS
void SplineCoefficientsAlongColumns(cv::Mat& image) {
  const float pole = std::sqrt(3.F) - 2;
  const int last = image.rows - 1;
  const int width = image.cols;
  if (last < 1) {
    image *= 1.0 / 6;  // the spline through one sample is constant
    return;
  }
  const int horizon = std::min(last, 12);  // pole^12 < 2e-7
  std::vector<float> start(width);
  float power = 1;
  for (int r = 0; r <= horizon; ++r, power *= pole) {
    const float* row = image.ptr<float>(r);
    for (int c = 0; c < width; ++c) start[c] += power * row[c];
  }
  std::copy(start.begin(), start.end(), image.ptr<float>(0));
  for (int r = 1; r <= last; ++r) {
    const float* before = image.ptr<float>(r - 1);
    float* row = image.ptr<float>(r);
    for (int c = 0; c < width; ++c) row[c] += pole * before[c];
  }
  {
    const float gain = pole / (pole * pole - 1);
    const float* before = image.ptr<float>(last - 1);
    float* row = image.ptr<float>(last);
    for (int c = 0; c < width; ++c) row[c] = gain * (pole * before[c] + row[c]);
  }
  for (int r = last - 1; r >= 0; --r) {
    const float* after = image.ptr<float>(r + 1);
    float* row = image.ptr<float>(r);
    for (int c = 0; c < width; ++c) row[c] = pole * (after[c] - row[c]);
  }
}

// In place, in both directions, but for the gain 6 of either. In strips that stay in the cache.
void FindSplineCoefficients(cv::Mat& image) {
  constexpr int kRows = 64;
  constexpr int kColumns = 64;
  cv::Mat turned;
  for (int r = 0; r < image.rows; r += kRows) {
    cv::Mat strip = image.rowRange(r, std::min(r + kRows, image.rows));
    cv::transpose(strip, turned);
    SplineCoefficientsAlongColumns(turned);
    cv::transpose(turned, strip);
  }
  for (int c = 0; c < image.cols; c += kColumns) {
    cv::Mat strip = image.colRange(c, std::min(c + kColumns, image.cols));
    SplineCoefficientsAlongColumns(strip);
  }
}

using Weights = std::array<float, 4>;

// Weights of the four coefficients round a sample, by its position between the middle two, with
// the coefficients' gain of 6.
const std::array<Weights, kPhases + 1>& SplineWeights() {
  static const auto table = [] {
    std::array<Weights, kPhases + 1> weights{};
    for (int i = 0; i <= kPhases; ++i) {
      const double t = static_cast<double>(i) / kPhases;
      const double s = 1 - t;
      weights[i] = {static_cast<float>(s * s * s), static_cast<float>(4 - 3 * t * t * (2 - t)),
                    static_cast<float>(4 - 3 * s * s * (2 - s)), static_cast<float>(t * t * t)};
    }
    return weights;
  }();
  return table;
}

using Floats = std::array<float, kNodeStep_px>;
using Ints = std::array<int, kNodeStep_px>;

// Source pixels of a stretch of one row of the frame, between two columns of nodes.
struct Stretch {
  int count = 0;
  Floats xs{};
  Floats ys{};
};

// By bilinear interpolation between the nodes, `row` pixels below the upper ones.
LAYGAUGE_WIDE_VECTORS
void MapStretch(const NodeMap& map, int column, int node_row, int row, const cv::Point2f& corner,
                Stretch& stretch) {
  const float down = static_cast<float>(row) / kNodeStep_px;
  const cv::Point2f left =
      map.At(column, node_row) * (1 - down) + map.At(column, node_row + 1) * down - corner;
  const cv::Point2f right =
      map.At(column + 1, node_row) * (1 - down) + map.At(column + 1, node_row + 1) * down - corner;
  const cv::Point2f step = (right - left) / static_cast<float>(kNodeStep_px);
  for (int i = 0; i < kNodeStep_px; ++i) {
    stretch.xs[i] = left.x + static_cast<float>(i) * step.x;
    stretch.ys[i] = left.y + static_cast<float>(i) * step.y;
  }
}

// sampler.Sample(stretch, out) samples at the source pixels. Square by square between the nodes:
// however the frame is turned in the photo, a square's source stays in the cache.
template <class Sampler>
cv::Mat SampleFrame(const NodeMap& map, const cv::Size& size, const cv::Point2f& corner,
                    Sampler sampler, const FinishStretch& finish = {}) {
  cv::Mat result(size, CV_32FC1);
  Stretch stretch;
  for (int top = 0; top < size.height; top += kNodeStep_px) {
    for (int left = 0; left < size.width; left += kNodeStep_px) {
      stretch.count = std::min(kNodeStep_px, size.width - left);
      for (int y = top; y < std::min(top + kNodeStep_px, size.height); ++y) {
        MapStretch(map, left / kNodeStep_px, top / kNodeStep_px, y - top, corner, stretch);
        float* values = result.ptr<float>(y) + left;
        sampler.Sample(stretch, values);
        if (finish) finish({left, y}, stretch.count, values);
      }
    }
  }
  return result;
}

// Photo pixels a frame pixel, at the frame's middle: above 1 the photo is the finer one.
double PhotoPixelsPerFramePixel(const NodeMap& map) {
  const int c = std::max(0, map.columns / 2 - 1);
  const int r = std::max(0, map.rows / 2 - 1);
  const double across = cv::norm(map.At(c + 1, r) - map.At(c, r));
  const double down = cv::norm(map.At(c, r + 1) - map.At(c, r));
  return std::max(across, down) / kNodeStep_px;
}

// In pixels of the photo. A Gaussian of half a frame pixel passes 8 % of what lies at the frame's
// sampling rate; the photo's own pixels already have their share of it.
double ResamplingBlurSdPx(double photo_px_per_frame_px) {
  if (photo_px_per_frame_px <= 1.05) return 0;  // nothing finer than the frame's pixels is there
  return 0.5 * std::sqrt(photo_px_per_frame_px * photo_px_per_frame_px - 1);
}

// Blurs so that nothing finer than the frame's pixels remains.
void LimitToFrame(double photo_px_per_frame_px, cv::Mat& linear) {
  const double sd_px = ResamplingBlurSdPx(photo_px_per_frame_px);
  if (sd_px > 0) cv::GaussianBlur(linear, linear, {}, sd_px, sd_px, cv::BORDER_REPLICATE);
}

// Where a stretch's samples lie: the upper left of four pixels, as an offset, and how far beyond.
struct Cells {
  Ints offsets{};
  Floats right{};
  Floats down{};
};

LAYGAUGE_WIDE_VECTORS
void FindCells(const Stretch& at, const cv::Size& size, int stride, Cells& cells) {
  const auto largest_x = static_cast<float>(size.width - 1);
  const auto largest_y = static_cast<float>(size.height - 1);
  const int last_column = size.width - 2;  // that has a next one
  const int last_row = size.height - 2;
  for (int i = 0; i < kNodeStep_px; ++i) {
    const float x = std::min(std::max(at.xs[i], 0.F), largest_x);
    const float y = std::min(std::max(at.ys[i], 0.F), largest_y);
    const int column = std::min(static_cast<int>(x), last_column);
    const int row = std::min(static_cast<int>(y), last_row);
    cells.offsets[i] = row * stride + column;
    cells.right[i] = x - static_cast<float>(column);
    cells.down[i] = y - static_cast<float>(row);
  }
}

// Two neighbours' values in one number, the left one in its lower `bits`.
struct Pairs {
  int bits = 8;
  Ints upper{};
  Ints lower{};
};

LAYGAUGE_WIDE_VECTORS
void Mix(const Pairs& pairs, const Cells& cells, int count, float* out) {
  const unsigned mask = (1U << pairs.bits) - 1;
  const float unit = 1.F / static_cast<float>(mask);
  const auto mixed = [&](int pair, float right) {
    const auto whole = static_cast<unsigned>(pair);
    const auto first = static_cast<float>(static_cast<int>(whole & mask));
    const auto second = static_cast<float>(static_cast<int>(whole >> pairs.bits));
    return first + right * (second - first);
  };
  for (int i = 0; i < count; ++i) {
    const float upper = mixed(pairs.upper[i], cells.right[i]);
    const float lower = mixed(pairs.lower[i], cells.right[i]);
    out[i] = unit * (upper + cells.down[i] * (lower - upper));
  }
}

// Samples a photo's encoded values by bilinear interpolation. Loops of their own for what vectors
// can do (positions, weights) and for what they cannot (fetching).
template <class Pixel, class Pair>
class EncodedSampler {
 public:
  explicit EncodedSampler(const cv::Mat& encoded)
      : encoded_(encoded), stride_(static_cast<int>(encoded.step1())) {
    static_assert(sizeof(Pair) == 2 * sizeof(Pixel));
    pairs_.bits = 8 * static_cast<int>(sizeof(Pixel));
  }

  void Sample(const Stretch& at, float* out) {
    FindCells(at, encoded_.size(), stride_, cells_);
    const auto* data = encoded_.ptr<Pixel>();
    for (int i = 0; i < at.count; ++i) {
      const Pixel* p = data + cells_.offsets[i];
      Pair upper = 0;
      Pair lower = 0;
      std::memcpy(&upper, p, sizeof upper);
      std::memcpy(&lower, p + stride_, sizeof lower);
      pairs_.upper[i] = static_cast<int>(upper);
      pairs_.lower[i] = static_cast<int>(lower);
    }
    Mix(pairs_, cells_, at.count, out);
  }

 private:
  const cv::Mat& encoded_;
  int stride_;
  Cells cells_;
  Pairs pairs_;
};

// The spline of a picture: pixel (0, 0) of the picture is (pad, pad) of `coefficients`.
struct Spline {
  Spline(const cv::Mat& coefficients, const cv::Size& size, int pad)
      : stride(static_cast<int>(coefficients.step1())),
        data(coefficients.ptr<float>(0) + (pad - 1) * (stride + 1)),
        largest_x(std::max(0.F, static_cast<float>(size.width) - 1.001F)),
        largest_y(std::max(0.F, static_cast<float>(size.height) - 1.001F)) {}

  int stride;
  const float* data;  // one before and above the picture's corner
  float largest_x;
  float largest_y;
  const std::array<Weights, kPhases + 1>& weights = SplineWeights();
};

// Where a stretch's samples lie in a spline: the first of 16 coefficients, and their weights.
struct SplinePlaces {
  Ints offsets{};
  Ints across{};
  Ints down{};
};

// Of one sample: the four columns' sums, weighted.
[[gnu::always_inline]] inline cv::v_float32x4 Products(const Spline& spline, const SplinePlaces& at,
                                                       int i) {
  const float* p = spline.data + at.offsets[i];
  const Weights& down = spline.weights[at.down[i]];
  cv::v_float32x4 sum = cv::v_load(p) * cv::v_setall_f32(down[0]);
  sum += cv::v_load(p + spline.stride) * cv::v_setall_f32(down[1]);
  sum += cv::v_load(p + 2 * spline.stride) * cv::v_setall_f32(down[2]);
  sum += cv::v_load(p + 3 * spline.stride) * cv::v_setall_f32(down[3]);
  return sum * cv::v_load(spline.weights[at.across[i]].data());
}

LAYGAUGE_WIDE_VECTORS
void SampleSpline(const Spline& spline, const Stretch& at, float* out) {
  SplinePlaces places;
  for (int i = 0; i < kNodeStep_px; ++i) {
    const float x = std::min(std::max(at.xs[i], 0.F), spline.largest_x);
    const float y = std::min(std::max(at.ys[i], 0.F), spline.largest_y);
    const int column = static_cast<int>(x);
    const int row = static_cast<int>(y);
    places.offsets[i] = row * spline.stride + column;
    // Never negative, and a cast is what the compiler can do eight at a time.
    // NOLINTBEGIN(bugprone-incorrect-roundings)
    places.across[i] = static_cast<int>((x - static_cast<float>(column)) * kPhases + 0.5F);
    places.down[i] = static_cast<int>((y - static_cast<float>(row)) * kPhases + 0.5F);
    // NOLINTEND(bugprone-incorrect-roundings)
  }
  int i = 0;
  for (; i + 4 <= at.count; i += 4) {
    cv::v_store(out + i, cv::v_reduce_sum4(
                             Products(spline, places, i), Products(spline, places, i + 1),
                             Products(spline, places, i + 2), Products(spline, places, i + 3)));
  }
  for (; i < at.count; ++i) out[i] = cv::v_reduce_sum(Products(spline, places, i));
}

struct SplineSampler {
  Spline spline;
  void Sample(const Stretch& at, float* out) const { SampleSpline(spline, at, out); }
};

}  // namespace

cv::Point2d PlaneFrame::SheetFromFrame(cv::Point2d pixel) const {
  const double turn = turn_deg * CV_PI / 180;
  const cv::Point2d at_mm = (pixel - origin_px) / px_per_mm;
  // Counter-clockwise as seen, in axes whose y points down.
  return center_mm + cv::Point2d(at_mm.x * std::cos(turn) + at_mm.y * std::sin(turn),
                                 -at_mm.x * std::sin(turn) + at_mm.y * std::cos(turn));
}

double ResamplingBlurSdMm(double photo_px_per_mm, double px_per_mm) {
  return ResamplingBlurSdPx(photo_px_per_mm / px_per_mm) / photo_px_per_mm;
}

cv::Mat Rectify(const Photo& photo, const View& view, const PlaneFrame& frame,
                const FinishStretch& finish) {
  const NodeMap map = MapNodes(view, frame);
  constexpr int kBorder_px = 16;  // beyond it the spline no longer feels where the region was cut
  const cv::Rect region = SourceRegion(map, photo.size(), kBorder_px);
  cv::Mat linear = LinearRegion(photo, region);
  LimitToFrame(PhotoPixelsPerFramePixel(map), linear);
  FindSplineCoefficients(linear);
  // Where the photo's edge cut the region, samples may need coefficients beyond it.
  const cv::Rect inner(1, 1, photo.size().width - 2, photo.size().height - 2);
  const int pad = (region & inner) == region ? 0 : 2;
  if (pad > 0) cv::copyMakeBorder(linear, linear, pad, pad, pad, pad, cv::BORDER_REFLECT_101);
  return SampleFrame(map, frame.size_px, region.tl(), SplineSampler{{linear, region.size(), pad}},
                     finish);
}

cv::Mat RectifyEncoded(const Photo& photo, const View& view, const PlaneFrame& frame) {
  const NodeMap map = MapNodes(view, frame);
  cv::Mat encoded = photo.encoded;
  if (encoded.cols < 2 || encoded.rows < 2) {
    cv::copyMakeBorder(encoded, encoded, 0, 1, 0, 1, cv::BORDER_REPLICATE);
  }
  if (encoded.depth() == CV_8U) {
    return SampleFrame(map, frame.size_px, {0, 0},
                       EncodedSampler<std::uint8_t, std::uint16_t>(encoded));
  }
  return SampleFrame(map, frame.size_px, {0, 0},
                     EncodedSampler<std::uint16_t, std::uint32_t>(encoded));
}

bool IsInPhoto(const Photo& photo, const View& view, const cv::Point2d& sheet_mm, double height_mm,
               double border_px) {
  const Eigen::Vector2d pixel = view.PixelFromSheet(sheet_mm.x, sheet_mm.y, height_mm);
  return pixel.x() >= border_px && pixel.y() >= border_px &&
         pixel.x() <= photo.size().width - 1 - border_px &&
         pixel.y() <= photo.size().height - 1 - border_px;
}

}  // namespace laygauge
