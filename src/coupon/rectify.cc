#include "coupon/rectify.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <limits>
#include <opencv2/imgproc.hpp>
#include <vector>

namespace laygauge {
namespace {

constexpr int kNodeStep_px = 32;
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

cv::Mat SplineCoefficients(const cv::Mat& image) {
  cv::Mat turned;
  cv::transpose(image, turned);
  SplineCoefficientsAlongColumns(turned);
  cv::Mat coefficients;
  cv::transpose(turned, coefficients);
  SplineCoefficientsAlongColumns(coefficients);
  coefficients *= 36;  // the gain 6 of either direction
  return coefficients;
}

using Weights = std::array<float, 4>;

// Weights of the four coefficients round a sample, by its position between the middle two.
const std::array<Weights, kPhases + 1>& SplineWeights() {
  static const auto table = [] {
    std::array<Weights, kPhases + 1> weights{};
    for (int i = 0; i <= kPhases; ++i) {
      const double t = static_cast<double>(i) / kPhases;
      const double s = 1 - t;
      weights[i] = {
          static_cast<float>(s * s * s / 6), static_cast<float>(2.0 / 3 - t * t * (2 - t) / 2),
          static_cast<float>(2.0 / 3 - s * s * (2 - s) / 2), static_cast<float>(t * t * t / 6)};
    }
    return weights;
  }();
  return table;
}

// Source pixels of one row of the frame, by bilinear interpolation between the nodes.
void MapRow(const NodeMap& map, int y, int width, const cv::Point2f& corner, std::vector<float>& xs,
            std::vector<float>& ys) {
  const int node_row = y / kNodeStep_px;
  const float down = static_cast<float>(y % kNodeStep_px) / kNodeStep_px;
  for (int node = 0, x = 0; x < width; ++node, x += kNodeStep_px) {
    const cv::Point2f left =
        map.At(node, node_row) * (1 - down) + map.At(node, node_row + 1) * down - corner;
    const cv::Point2f right =
        map.At(node + 1, node_row) * (1 - down) + map.At(node + 1, node_row + 1) * down - corner;
    const cv::Point2f step = (right - left) / static_cast<float>(kNodeStep_px);
    const int count = std::min(kNodeStep_px, width - x);
    for (int i = 0; i < count; ++i) {
      xs[x + i] = left.x + static_cast<float>(i) * step.x;
      ys[x + i] = left.y + static_cast<float>(i) * step.y;
    }
  }
}

template <class Sample>
cv::Mat SampleFrame(const NodeMap& map, const cv::Size& size, const cv::Point2f& corner,
                    Sample&& sample) {
  cv::Mat result(size, CV_32FC1);
  std::vector<float> xs(size.width);
  std::vector<float> ys(size.width);
  for (int y = 0; y < size.height; ++y) {
    MapRow(map, y, size.width, corner, xs, ys);
    auto* out = result.ptr<float>(y);
    for (int x = 0; x < size.width; ++x) out[x] = sample(xs[x], ys[x]);
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

template <class Pixel>
cv::Mat SampleEncoded(const Photo& photo, const View& view, const PlaneFrame& frame) {
  const NodeMap map = MapNodes(view, frame);
  constexpr float kUnit = 1.F / static_cast<float>(std::numeric_limits<Pixel>::max());
  const int last_x = photo.encoded.cols - 1;
  const int last_y = photo.encoded.rows - 1;
  const auto* data = photo.encoded.ptr<Pixel>(0);
  const size_t stride = photo.encoded.step1();
  return SampleFrame(map, frame.size_px, {0, 0}, [&](float x, float y) {
    x = std::clamp(x, 0.F, static_cast<float>(last_x));
    y = std::clamp(y, 0.F, static_cast<float>(last_y));
    const int column = std::min(static_cast<int>(x), std::max(0, last_x - 1));
    const int row = std::min(static_cast<int>(y), std::max(0, last_y - 1));
    const float right = x - static_cast<float>(column);
    const float down = y - static_cast<float>(row);
    const Pixel* p = data + row * stride + column;
    const Pixel* q = last_y > 0 ? p + stride : p;
    const int beside = last_x > 0 ? 1 : 0;
    const float upper =
        static_cast<float>(p[0]) * (1 - right) + static_cast<float>(p[beside]) * right;
    const float lower =
        static_cast<float>(q[0]) * (1 - right) + static_cast<float>(q[beside]) * right;
    return kUnit * (upper + down * (lower - upper));
  });
}

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

cv::Mat Rectify(const Photo& photo, const View& view, const PlaneFrame& frame) {
  const NodeMap map = MapNodes(view, frame);
  constexpr int kBorder_px = 16;  // beyond it the spline no longer feels where the region was cut
  const cv::Rect region = SourceRegion(map, photo.size(), kBorder_px);
  cv::Mat linear = LinearRegion(photo, region);
  LimitToFrame(PhotoPixelsPerFramePixel(map), linear);
  cv::Mat coefficients;
  constexpr int kPad = 2;
  cv::copyMakeBorder(SplineCoefficients(linear), coefficients, kPad, kPad, kPad, kPad,
                     cv::BORDER_REFLECT_101);
  const auto& weights = SplineWeights();
  const auto largest_x = static_cast<float>(region.width) - 1.001F;
  const auto largest_y = static_cast<float>(region.height) - 1.001F;
  const size_t stride = coefficients.step1();
  const auto* data = coefficients.ptr<float>(0);
  const cv::Point2f corner(region.tl());
  return SampleFrame(map, frame.size_px, corner, [&](float x, float y) {
    x = std::clamp(x, 0.F, std::max(0.F, largest_x));
    y = std::clamp(y, 0.F, std::max(0.F, largest_y));
    const int column = static_cast<int>(x);
    const int row = static_cast<int>(y);
    const Weights& wx =
        weights[static_cast<int>((x - static_cast<float>(column)) * kPhases + 0.5F)];
    const Weights& wy = weights[static_cast<int>((y - static_cast<float>(row)) * kPhases + 0.5F)];
    const float* p = data + (row + kPad - 1) * stride + (column + kPad - 1);
    float columns[4];
    for (int i = 0; i < 4; ++i) {
      columns[i] = wy[0] * p[i] + wy[1] * p[stride + i] + wy[2] * p[2 * stride + i] +
                   wy[3] * p[3 * stride + i];
    }
    return wx[0] * columns[0] + wx[1] * columns[1] + wx[2] * columns[2] + wx[3] * columns[3];
  });
}

cv::Mat RectifyEncoded(const Photo& photo, const View& view, const PlaneFrame& frame) {
  return photo.encoded.depth() == CV_8U ? SampleEncoded<std::uint8_t>(photo, view, frame)
                                        : SampleEncoded<std::uint16_t>(photo, view, frame);
}

bool IsInPhoto(const Photo& photo, const View& view, const cv::Point2d& sheet_mm, double height_mm,
               double border_px) {
  const Eigen::Vector2d pixel = view.PixelFromSheet(sheet_mm.x, sheet_mm.y, height_mm);
  return pixel.x() >= border_px && pixel.y() >= border_px &&
         pixel.x() <= photo.size().width - 1 - border_px &&
         pixel.y() <= photo.size().height - 1 - border_px;
}

}  // namespace laygauge
