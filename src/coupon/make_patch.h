#pragma once

#include <string>

#include "base/error.h"
#include "coupon/light.h"
#include "coupon/locate.h"
#include "coupon/patch.h"
#include "coupon/regions.h"
#include "photo/photo.h"
#include "sheet/camera.h"

namespace laygauge {

struct PatchOptions {
  double most_clipped_pct = 0.5;  // of the field's pixels, at full scale
  double darkest_level = 0.002;   // the field's mean linear light, of full scale
  void Check() const;             // throws BadOption
};

// The coupon's top as a patch: rectified in the plane `thickness_mm` above the paper, divided by
// the paper's light at each place, then by the field's mean. Not yet brought to the common
// resolution. `regions` is shared, not copied.
// Problem: the coupon is over-exposed, or too dark to tell anything.
[[nodiscard]] Expected<Patch> MakePatch(const Photo& photo, const View& view, const Light& light,
                                        const Placement& placement, double thickness_mm,
                                        const CouponRegions& regions, const PatchOptions& options);

}  // namespace laygauge
