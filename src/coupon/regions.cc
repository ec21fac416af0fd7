#include "coupon/regions.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <cstring>
#include <vector>

#include "base/error.h"

namespace laygauge {
namespace {

void RequireRange(const char* field, double value, double low, double high) {
  if (!(value >= low && value <= high)) {
    throw BadOption(
        fmt::format("RegionOptions.{} is {}; {} to {} is allowed", field, value, low, high));
  }
}

// A stretch of a row, mm. The one without points has its ends the wrong way round.
struct Interval {
  double from_mm = INFINITY;
  double to_mm = -INFINITY;
  void Take(double x_mm) {
    from_mm = std::min(from_mm, x_mm);
    to_mm = std::max(to_mm, x_mm);
  }
};

// A circle's part of the row at y.
Interval OfCircle(const cv::Point2d& center, double radius_mm, double y_mm) {
  const double square = radius_mm * radius_mm - (y_mm - center.y) * (y_mm - center.y);
  if (square < 0) return {};
  return {center.x - std::sqrt(square), center.x + std::sqrt(square)};
}

// What of the row lies within `reach_mm` of the straight edge a -> b: one stretch, as that is a
// convex shape, of a circle round either end and a rectangle.
Interval NearEdge(const cv::Point2d& a, const cv::Point2d& b, double reach_mm, double y_mm) {
  Interval near = OfCircle(a, reach_mm, y_mm);
  const Interval of_b = OfCircle(b, reach_mm, y_mm);
  near = {std::min(near.from_mm, of_b.from_mm), std::max(near.to_mm, of_b.to_mm)};
  const cv::Point2d along = b - a;
  const cv::Point2d off = cv::Point2d(-along.y, along.x) * (reach_mm / cv::norm(along));
  const std::array<cv::Point2d, 4> corners = {a + off, b + off, b - off, a - off};
  for (size_t i = 0; i < corners.size(); ++i) {
    const cv::Point2d& from = corners[i];
    const cv::Point2d& to = corners[(i + 1) % corners.size()];
    if ((from.y > y_mm) == (to.y > y_mm)) continue;
    near.Take(from.x + (to.x - from.x) * (y_mm - from.y) / (to.y - from.y));
  }
  return near;
}

// A row of the mask, drawn over from the innermost region to the outermost.
class Row {
 public:
  Row(const CouponRegions& regions, int row, std::uint8_t* pixels)
      : regions_(regions),
        y_mm_((row - regions.origin_px.y) / regions.px_per_mm),
        pixels_(pixels) {}

  void Draw(const CouponDescription& coupon, const RegionOptions& options) {
    Fill(0, regions_.regions.cols, Region::kField);
    DrawNear(coupon, options.field_from_outline_mm, options.field_from_hole_mm, Region::kMargin);
    DrawNear(coupon, coupon.wall_mm, coupon.wall_mm, Region::kWall);
    for (const Hole& hole : coupon.holes) DrawRound(hole, 0, Region::kOff);
    DrawOutside(coupon.outline_mm);
  }

 private:
  void Fill(int begin, int end, Region region) {
    if (begin < end) std::memset(pixels_ + begin, static_cast<int>(region), end - begin);
  }

  // Pixels whose centres lie in the interval, ends included but for rounding.
  void Fill(const Interval& interval, Region region) {
    constexpr double kRounding_px = 1e-6;
    if (interval.from_mm > interval.to_mm) return;
    const double from = interval.from_mm * regions_.px_per_mm + regions_.origin_px.x;
    const double to = interval.to_mm * regions_.px_per_mm + regions_.origin_px.x;
    const double columns = regions_.regions.cols;
    Fill(static_cast<int>(std::ceil(std::clamp(from - kRounding_px, 0.0, columns))),
         static_cast<int>(std::floor(std::clamp(to + kRounding_px, -1.0, columns - 1))) + 1,
         region);
  }

  void DrawRound(const Hole& hole, double beyond_mm, Region region) {
    Fill(OfCircle({hole.x_mm, hole.y_mm}, hole.diameter_mm / 2 + beyond_mm, y_mm_), region);
  }

  void DrawNear(const CouponDescription& coupon, double outline_reach_mm, double hole_reach_mm,
                Region region) {
    const auto& outline = coupon.outline_mm;
    for (size_t i = 0; i < outline.size(); ++i) {
      Fill(NearEdge(outline[i], outline[(i + 1) % outline.size()], outline_reach_mm, y_mm_),
           region);
    }
    for (const Hole& hole : coupon.holes) DrawRound(hole, hole_reach_mm, region);
  }

  // Between the row's crossings with the outline, from outside to inside and back.
  void DrawOutside(const std::vector<cv::Point2d>& outline) {
    std::vector<double> crossings_mm = {-INFINITY};
    for (size_t i = 0; i < outline.size(); ++i) {
      const cv::Point2d& a = outline[i];
      const cv::Point2d& b = outline[(i + 1) % outline.size()];
      if ((a.y > y_mm_) == (b.y > y_mm_)) continue;
      crossings_mm.push_back(a.x + (b.x - a.x) * (y_mm_ - a.y) / (b.y - a.y));
    }
    crossings_mm.push_back(INFINITY);
    std::sort(crossings_mm.begin(), crossings_mm.end());
    for (size_t i = 0; i + 1 < crossings_mm.size(); i += 2) {
      Fill(Interval{crossings_mm[i], crossings_mm[i + 1]}, Region::kOff);
    }
  }

  const CouponRegions& regions_;
  double y_mm_;
  std::uint8_t* pixels_;
};

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

  for (int r = 0; r < size.height; ++r) {
    Row(result, r, result.regions.ptr<std::uint8_t>(r)).Draw(coupon, options);
  }
  result.field_pixels = cv::countNonZero(result.regions == static_cast<int>(Region::kField));
  return result;
}

}  // namespace laygauge
