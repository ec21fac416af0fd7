#include "coupon/coupon_description.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <stdexcept>

#include "base/embedded.h"
#include "base/file.h"
#include "base/json_view.h"

namespace laygauge {

const std::vector<EmbeddedFile>& EmbeddedCoupons();

namespace {

constexpr double kSmallestSide_mm = 5;
constexpr double kLargestSide_mm = 300;

double Cross(const cv::Point2d& a, const cv::Point2d& b) { return a.x * b.y - a.y * b.x; }

double DistanceToSegment(const cv::Point2d& p, const cv::Point2d& a, const cv::Point2d& b) {
  const cv::Point2d along = b - a;
  const double t = std::clamp((p - a).dot(along) / along.dot(along), 0.0, 1.0);
  return cv::norm(p - (a + t * along));
}

bool SegmentsMeet(const cv::Point2d& a, const cv::Point2d& b, const cv::Point2d& c,
                  const cv::Point2d& d) {
  const double c_side = Cross(b - a, c - a);
  const double d_side = Cross(b - a, d - a);
  const double a_side = Cross(d - c, a - c);
  const double b_side = Cross(d - c, b - c);
  if (c_side * d_side < 0 && a_side * b_side < 0) return true;
  constexpr double kTouching_mm = 1e-6;
  return DistanceToSegment(c, a, b) < kTouching_mm || DistanceToSegment(d, a, b) < kTouching_mm ||
         DistanceToSegment(a, c, d) < kTouching_mm || DistanceToSegment(b, c, d) < kTouching_mm;
}

bool IsInside(const cv::Point2d& p, const std::vector<cv::Point2d>& polygon) {
  bool inside = false;
  for (size_t i = 0, j = polygon.size() - 1; i < polygon.size(); j = i++) {
    const cv::Point2d& a = polygon[i];
    const cv::Point2d& b = polygon[j];
    if ((a.y > p.y) == (b.y > p.y)) continue;
    if (p.x < a.x + (b.x - a.x) * (p.y - a.y) / (b.y - a.y)) inside = !inside;
  }
  return inside;
}

double DistanceToOutline(const cv::Point2d& p, const std::vector<cv::Point2d>& polygon) {
  double nearest = INFINITY;
  for (size_t i = 0; i < polygon.size(); ++i) {
    nearest =
        std::min(nearest, DistanceToSegment(p, polygon[i], polygon[(i + 1) % polygon.size()]));
  }
  return nearest;
}

double PositiveNumber(const JsonView& view, std::string_view key, double largest) {
  const double value = view.Number(key);
  if (value <= 0 || value > largest) {
    view.Fail(key, fmt::format("more than 0 and at most {} was expected, not {}", largest, value));
  }
  return value;
}

void CheckOutline(const JsonView& view, const CouponDescription& coupon) {
  const auto& outline = coupon.outline_mm;
  const size_t n = outline.size();
  if (n < 3) view.Fail("outline_mm", fmt::format("3 or more corners were expected, not {}", n));
  if (n > 1000) view.Fail("outline_mm", fmt::format("at most 1000 corners are read, not {}", n));
  for (size_t i = 0; i < n; ++i) {
    if (cv::norm(outline[i] - outline[(i + 1) % n]) < 1e-3) {
      view.Fail(fmt::format("outline_mm[{}]", i), "this corner is the same as the next one");
    }
  }
  for (size_t i = 0; i < n; ++i) {
    for (size_t j = i + 2; j < n; ++j) {
      if (i == 0 && j == n - 1) continue;  // neighbours, across the list's end
      if (SegmentsMeet(outline[i], outline[i + 1], outline[j], outline[(j + 1) % n])) {
        view.Fail("outline_mm", fmt::format("the outline crosses itself: sides {} and {}", i, j));
      }
    }
  }
  const cv::Rect2d bounds = coupon.Bounds();
  if (std::min(bounds.width, bounds.height) < kSmallestSide_mm ||
      std::max(bounds.width, bounds.height) > kLargestSide_mm) {
    view.Fail("outline_mm",
              fmt::format("{} to {} mm wide and high was expected, not {:.3g} x {:.3g} mm",
                          kSmallestSide_mm, kLargestSide_mm, bounds.width, bounds.height));
  }
  const cv::Point2d center = (bounds.tl() + bounds.br()) / 2;
  if (cv::norm(center) > 0.01) {
    view.Fail("outline_mm", fmt::format("the outline's centre must be at 0, 0; it is at {:.3f}, "
                                        "{:.3f} mm: subtract that from all positions",
                                        center.x, center.y));
  }
}

Hole ReadHole(const JsonView& view, const CouponDescription& coupon) {
  Hole hole;
  hole.x_mm = view.Number("x_mm");
  hole.y_mm = view.Number("y_mm");
  hole.diameter_mm = PositiveNumber(view, "diameter_mm", kLargestSide_mm);
  const cv::Point2d center(hole.x_mm, hole.y_mm);
  const double radius_mm = hole.diameter_mm / 2;
  if (!IsInside(center, coupon.outline_mm) ||
      DistanceToOutline(center, coupon.outline_mm) <= radius_mm) {
    view.Fail("", "the hole must lie wholly inside the outline");
  }
  for (size_t i = 0; i < coupon.holes.size(); ++i) {
    const Hole& other = coupon.holes[i];
    if (cv::norm(center - cv::Point2d(other.x_mm, other.y_mm)) <=
        radius_mm + other.diameter_mm / 2) {
      view.Fail("", fmt::format("the hole overlaps holes[{}]", i));
    }
  }
  return hole;
}

CouponDescription ReadDescription(const JsonView& view) {
  CouponDescription coupon;
  coupon.name = view.Text("coupon");
  if (coupon.name.empty()) view.Fail("coupon", "a name was expected, not an empty text");
  for (const auto& [x, y] : view.Pairs("outline_mm")) coupon.outline_mm.emplace_back(x, y);
  CheckOutline(view, coupon);
  coupon.thickness_mm = PositiveNumber(view, "thickness_mm", 100);
  coupon.layer_height_mm = PositiveNumber(view, "layer_height_mm", coupon.thickness_mm);
  coupon.wall_mm = view.Number("wall_mm");
  const cv::Rect2d bounds = coupon.Bounds();
  const double widest_wall_mm = std::min(bounds.width, bounds.height) / 2;
  if (coupon.wall_mm < 0 || coupon.wall_mm >= widest_wall_mm) {
    view.Fail("wall_mm", fmt::format("0 or more and less than {:.3g} was expected, not {}",
                                     widest_wall_mm, coupon.wall_mm));
  }
  for (const JsonView& hole : view.MaybeObjects("holes")) {
    coupon.holes.push_back(ReadHole(hole, coupon));
    for (auto& key : hole.UnknownKeys()) coupon.unknown_keys.push_back(std::move(key));
  }
  coupon.lay_deg = view.MaybeNumber("lay_deg");
  if (coupon.lay_deg && (*coupon.lay_deg < 0 || *coupon.lay_deg >= 180)) {
    view.Fail("lay_deg",
              fmt::format("0 or more and less than 180 was expected, not {}", *coupon.lay_deg));
  }
  for (auto& key : view.UnknownKeys()) coupon.unknown_keys.push_back(std::move(key));
  return coupon;
}

}  // namespace

cv::Rect2d CouponDescription::Bounds() const {
  cv::Point2d low(INFINITY, INFINITY);
  cv::Point2d high(-INFINITY, -INFINITY);
  for (const cv::Point2d& corner : outline_mm) {
    low = {std::min(low.x, corner.x), std::min(low.y, corner.y)};
    high = {std::max(high.x, corner.x), std::max(high.y, corner.y)};
  }
  return {low, high};
}

Expected<CouponDescription> ParseCoupon(std::string_view json_text, const std::string& file_name) {
  return ParseJson(json_text, file_name, ReadDescription);
}

Expected<CouponDescription> ReadCoupon(const std::filesystem::path& path) {
  const auto text = ReadFile(path);
  if (!text) return tl::unexpected(text.error());
  return ParseCoupon(*text, path.string());
}

std::string FormatCoupon(const CouponDescription& coupon) {
  nlohmann::ordered_json json;
  json["coupon"] = coupon.name;
  for (const cv::Point2d& corner : coupon.outline_mm) {
    json["outline_mm"].push_back({corner.x, corner.y});
  }
  json["thickness_mm"] = coupon.thickness_mm;
  json["layer_height_mm"] = coupon.layer_height_mm;
  json["wall_mm"] = coupon.wall_mm;
  json["holes"] = nlohmann::ordered_json::array();
  for (const Hole& hole : coupon.holes) {
    json["holes"].push_back(
        {{"x_mm", hole.x_mm}, {"y_mm", hole.y_mm}, {"diameter_mm", hole.diameter_mm}});
  }
  if (coupon.lay_deg) json["lay_deg"] = *coupon.lay_deg;
  return json.dump(1) + "\n";
}

const std::vector<CouponDescription>& ShippedCoupons() {
  static const std::vector<CouponDescription> coupons = [] {
    std::vector<CouponDescription> shipped;
    for (const EmbeddedFile& file : EmbeddedCoupons()) {
      auto coupon = ParseCoupon(file.text, std::string(file.name));
      if (!coupon) throw std::logic_error(coupon.error().message);
      shipped.push_back(std::move(*coupon));
    }
    return shipped;
  }();
  return coupons;
}

}  // namespace laygauge
