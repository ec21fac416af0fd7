#include "texture/surface.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>

namespace laygauge {
namespace {

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

}  // namespace

AlignedField AlignField(const Patch& patch, double lay_deg) {
  constexpr int kBorderPx = 10;  // room for filters
  const double lay = lay_deg * std::numbers::pi / 180;
  const cv::Point2d along(std::cos(lay), -std::sin(lay));
  const cv::Point2d across(std::sin(lay), std::cos(lay));
  const cv::Mat field = patch.regions == static_cast<int>(Region::kField);
  AlignedField aligned;
  aligned.px_per_mm = patch.px_per_mm;
  if (cv::countNonZero(field) == 0) {
    return aligned;
  }
  const cv::Rect2d bounds = TurnedBounds(field, patch.origin_px, along, across);
  const double u0 = std::floor(bounds.x - kBorderPx);
  const double v0 = std::floor(bounds.y - kBorderPx);
  const cv::Size size(static_cast<int>(bounds.width + 2 * kBorderPx) + 2,
                      static_cast<int>(bounds.height + 2 * kBorderPx) + 2);
  // Reading nothing but the field and its border is what makes this fast.
  cv::Rect read = cv::boundingRect(field);
  read = cv::Rect(read.x - kBorderPx, read.y - kBorderPx, read.width + 2 * kBorderPx,
                  read.height + 2 * kBorderPx) &
         cv::Rect({}, patch.relative.size());
  const cv::Point2d start = along * u0 + across * v0 + patch.origin_px;
  const cv::Matx23d read_from_aligned(along.x, across.x, start.x - read.x,  //
                                      along.y, across.y, start.y - read.y);
  cv::warpAffine(patch.relative(read), aligned.relative, read_from_aligned, size,
                 cv::INTER_CUBIC | cv::WARP_INVERSE_MAP, cv::BORDER_CONSTANT, cv::Scalar::all(1));
  cv::warpAffine(patch.regions(read), aligned.regions, read_from_aligned, size,
                 cv::INTER_NEAREST | cv::WARP_INVERSE_MAP, cv::BORDER_CONSTANT,
                 cv::Scalar::all(static_cast<int>(Region::kOff)));
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
    const auto* top = field.relative.ptr<float>(2 * y);
    const auto* low = field.relative.ptr<float>(2 * y + 1);
    const auto* top_region = field.regions.ptr<std::uint8_t>(2 * y);
    const auto* low_region = field.regions.ptr<std::uint8_t>(2 * y + 1);
    auto* out = half.relative.ptr<float>(y);
    auto* out_region = half.regions.ptr<std::uint8_t>(y);
    for (int x = 0; x < cols; ++x) {
      out[x] = 0.25F * (top[2 * x] + top[2 * x + 1] + low[2 * x] + low[2 * x + 1]);
      out_region[x] = std::min(std::min(top_region[2 * x], top_region[2 * x + 1]),
                               std::min(low_region[2 * x], low_region[2 * x + 1]));
    }
  }
  // The centre of pixel (0, 0) lies at (0.5, 0.5) of the finer image.
  const cv::Matx23d& m = field.coupon_from_aligned;
  half.coupon_from_aligned = {2 * m(0, 0), 2 * m(0, 1), m(0, 2) + 0.5 * (m(0, 0) + m(0, 1)),  //
                              2 * m(1, 0), 2 * m(1, 1), m(1, 2) + 0.5 * (m(1, 0) + m(1, 1))};
  return half;
}

Surface MakeSurface(const Patch& patch, const CouponDescription& coupon) {
  Surface surface;
  surface.patch = &patch;
  surface.coupon = &coupon;
  surface.spectrum = MeasureFieldSpectrum(patch);
  LineSpectrumOptions options;
  options.nominal_lay_deg = coupon.lay_deg;
  const Expected<Lines> lines = FindLines(surface.spectrum, options);
  if (lines) {
    surface.lines = *lines;
  } else {
    surface.no_lines_reason = lines.error().message;
  }
  const double lay = surface.lines ? surface.lines->lay_deg : coupon.lay_deg.value_or(0);
  surface.aligned = AlignField(patch, lay);
  surface.aligned_half = HalveField(surface.aligned);
  const auto pitch_mm =
      surface.lines ? std::optional<double>(surface.lines->pitch_mm) : std::nullopt;
  surface.valleys = FindLineValleys(surface.aligned, pitch_mm, patch.blur_sd_mm);
  surface.torn = FindTornArea(
      patch, surface.lines ? std::optional<double>(surface.lines->lay_deg) : std::nullopt);
  surface.top = MakeTopView(patch, lay, surface.torn);
  if (!surface.torn.Failed()) {
    surface.scars = FindTracks(surface.top);
  }
  return surface;
}

}  // namespace laygauge
