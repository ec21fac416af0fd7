#pragma once

#include <filesystem>
#include <opencv2/core.hpp>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.h"

namespace laygauge {

struct Hole {
  double x_mm = 0;
  double y_mm = 0;
  double diameter_mm = 0;
};

// docs/formats.md, "Coupon description". Origin at the centre of the outline's bounding box,
// x right, y down, as the coupon lies when its drawing is read upright, seen from above.
struct CouponDescription {
  std::string name;
  std::vector<cv::Point2d> outline_mm;  // simple polygon
  double thickness_mm = 0;
  double layer_height_mm = 0;
  double wall_mm = 0;  // width of the wall loops
  std::vector<Hole> holes;
  std::optional<double> lay_deg;  // nominal
  std::vector<std::string> unknown_keys;

  [[nodiscard]] cv::Rect2d Bounds() const;
};

// Problem: malformed, a wrong type, fewer than 3 corners, a hole outside the outline.
[[nodiscard]] Expected<CouponDescription> ReadCoupon(const std::filesystem::path& path);
[[nodiscard]] Expected<CouponDescription> ParseCoupon(std::string_view json_text,
                                                      const std::string& file_name);
[[nodiscard]] std::string FormatCoupon(const CouponDescription& coupon);

// The shipped coupons (calibration/coupons, embedded at build time).
[[nodiscard]] const std::vector<CouponDescription>& ShippedCoupons();

}  // namespace laygauge
