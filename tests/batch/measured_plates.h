#pragma once

#include <map>
#include <optional>
#include <string>
#include <vector>

#include "report/record.h"

namespace laygauge {

// What the rendering of a sample plate says of one coupon (tests/truth/NAME.truth.json).
struct CouponTruth {
  std::string kind;  // "raster", "ironed", "delaminated"
  double center_x_mm = 0;
  double center_y_mm = 0;
  double turn_deg = 0;
  std::map<std::string, double> numbers;  // pitch_mm, lay_deg, gap_area_pct, ridge_um, ...
};

// A coupon as the whole chain measured it, beside its truth.
struct MeasuredCoupon {
  std::string plate;
  const CouponRecord* record = nullptr;
  CouponTruth truth;

  [[nodiscard]] std::optional<double> Value(const std::string& feature) const;
  [[nodiscard]] std::string Name() const { return plate + " " + record->well; }
};

// The sample plates d1 to d7, measured once a process by the whole chain with shipped settings.
// Throws std::runtime_error if one of them is refused.
[[nodiscard]] const std::vector<PhotoRecord>& MeasuredPlates();
[[nodiscard]] const std::vector<MeasuredCoupon>& MeasuredCoupons();

}  // namespace laygauge
