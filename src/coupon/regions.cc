#include "coupon/regions.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <vector>

#include "base/error.h"
#include "base/vectorize.h"

namespace laygauge {
namespace {

void RequireRange(const char* field, double value, double low, double high) {
  if (!(value >= low && value <= high)) {
    throw BadOption(
        fmt::format("RegionOptions.{} is {}; {} to {} is allowed", field, value, low, high));
  }
}

// One row of pixel centres, in mm: squared distances and insideness, for all columns at once.
struct Row {
  std::vector<float> x_mm;
  std::vector<float> to_outline_mm2;  // squared
  std::vector<float> to_hole_mm;      // to the nearest hole's edge; negative in the hole
  std::vector<float> crossings_mm;    // where the row meets the outline, sorted
};

// Lowers `squares` to the squared distances of the row's pixels from a straight edge a -> b.
LAYGAUGE_WIDE_VECTORS
void NearEdge(const std::vector<float>& x_mm, float y_mm, const cv::Point2f& a,
              const cv::Point2f& b, std::vector<float>& squares) {
  const cv::Point2f along = b - a;
  const float per_length2 = 1 / along.dot(along);
  const float dy = y_mm - a.y;
  const float* xs = x_mm.data();
  float* out = squares.data();
  for (size_t c = 0; c < x_mm.size(); ++c) {
    const float dx = xs[c] - a.x;
    const float t = std::min(std::max((dx * along.x + dy * along.y) * per_length2, 0.F), 1.F);
    const float ex = dx - t * along.x;
    const float ey = dy - t * along.y;
    out[c] = std::min(out[c], ex * ex + ey * ey);
  }
}

// Lowers `distances` to those from a hole's edge.
LAYGAUGE_WIDE_VECTORS
void NearHole(const std::vector<float>& x_mm, float y_mm, const Hole& hole,
              std::vector<float>& distances) {
  const auto hole_x = static_cast<float>(hole.x_mm);
  const float dy = y_mm - static_cast<float>(hole.y_mm);
  const auto radius = static_cast<float>(hole.diameter_mm / 2);
  const float* xs = x_mm.data();
  float* out = distances.data();
  for (size_t c = 0; c < x_mm.size(); ++c) {
    const float dx = xs[c] - hole_x;
    out[c] = std::min(out[c], std::sqrt(dx * dx + dy * dy) - radius);
  }
}

void MeasureOutline(const std::vector<cv::Point2d>& outline, float y_mm, Row& row) {
  std::fill(row.to_outline_mm2.begin(), row.to_outline_mm2.end(), 1e12F);
  row.crossings_mm.clear();
  for (size_t i = 0; i < outline.size(); ++i) {
    const cv::Point2f a = outline[i];
    const cv::Point2f b = outline[(i + 1) % outline.size()];
    NearEdge(row.x_mm, y_mm, a, b, row.to_outline_mm2);
    if ((a.y > y_mm) != (b.y > y_mm)) {
      row.crossings_mm.push_back(a.x + (b.x - a.x) * (y_mm - a.y) / (b.y - a.y));
    }
  }
  std::sort(row.crossings_mm.begin(), row.crossings_mm.end());
}

void MeasureHoles(const std::vector<Hole>& holes, float y_mm, Row& row) {
  std::fill(row.to_hole_mm.begin(), row.to_hole_mm.end(), 1e6F);
  for (const Hole& hole : holes) NearHole(row.x_mm, y_mm, hole, row.to_hole_mm);
}

}  // namespace

void RegionOptions::Check() const {
  RequireRange("px_per_mm", px_per_mm, 1, 100);
  RequireRange("border_mm", border_mm, 0, 20);
  RequireRange("field_from_outline_mm", field_from_outline_mm, 0, 100);
  RequireRange("field_from_hole_mm", field_from_hole_mm, 0, 100);
}

CouponRegions MakeRegions(const CouponDescription& coupon, const RegionOptions& options) {
  options.Check();
  const cv::Rect2d bounds = coupon.Bounds();
  const cv::Size size(
      static_cast<int>(std::ceil((bounds.width + 2 * options.border_mm) * options.px_per_mm)),
      static_cast<int>(std::ceil((bounds.height + 2 * options.border_mm) * options.px_per_mm)));
  CouponRegions result;
  result.px_per_mm = options.px_per_mm;
  const cv::Point2d middle_mm = (bounds.tl() + bounds.br()) / 2;
  result.origin_px =
      cv::Point2d((size.width - 1) / 2.0, (size.height - 1) / 2.0) - middle_mm * options.px_per_mm;
  result.regions.create(size, CV_8UC1);

  Row row;
  for (int c = 0; c < size.width; ++c) {
    row.x_mm.push_back(static_cast<float>((c - result.origin_px.x) / options.px_per_mm));
  }
  row.to_outline_mm2.resize(row.x_mm.size());
  row.to_hole_mm.resize(row.x_mm.size());
  const auto wall = static_cast<float>(coupon.wall_mm);
  const auto outline_gap = static_cast<float>(options.field_from_outline_mm);
  const auto hole_gap = static_cast<float>(options.field_from_hole_mm);
  for (int r = 0; r < size.height; ++r) {
    const auto y_mm = static_cast<float>((r - result.origin_px.y) / options.px_per_mm);
    MeasureOutline(coupon.outline_mm, y_mm, row);
    MeasureHoles(coupon.holes, y_mm, row);
    auto* out = result.regions.ptr<std::uint8_t>(r);
    size_t crossed = 0;
    for (int c = 0; c < size.width; ++c) {
      while (crossed < row.crossings_mm.size() && row.crossings_mm[crossed] < row.x_mm[c]) {
        ++crossed;
      }
      const float outline_mm = std::sqrt(row.to_outline_mm2[c]);
      const float hole_mm = row.to_hole_mm[c];
      Region region = Region::kMargin;
      if (crossed % 2 == 0 || hole_mm <= 0) {
        region = Region::kOff;
      } else if (outline_mm <= wall || hole_mm <= wall) {
        region = Region::kWall;
      } else if (outline_mm > outline_gap && hole_mm > hole_gap) {
        region = Region::kField;
        ++result.field_pixels;
      }
      out[c] = static_cast<std::uint8_t>(region);
    }
  }
  return result;
}

}  // namespace laygauge
