#pragma once

#include "coupon/coupon_description.h"
#include "coupon/patch.h"

namespace laygauge {

// How a closed groove along the lay looks in this light: its own darkness, and how much the light
// comes from one side.
struct GrooveShading {
  double darkness_um = 0;  // may be negative: a groove that mirrors a light
  double tilt_um = 0;      // 0 or more
};

// The wall is two loops (common practice: wall_mm is twice the line width); the groove between
// them is closed on every coupon. Where it runs along the lay it shows what the light makes of a
// closed groove in this direction: a probe of the light that the coupon carries with it. Points
// of the contours count by how nearly they run along the lay.
[[nodiscard]] GrooveShading MeasureGrooveShading(const Patch& patch,
                                                 const CouponDescription& coupon, double lay_deg);

}  // namespace laygauge
