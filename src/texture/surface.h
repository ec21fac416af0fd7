#pragma once

#include <opencv2/core.hpp>
#include <optional>
#include <string>
#include <vector>

#include "coupon/coupon_description.h"
#include "coupon/patch.h"
#include "texture/aligned_field.h"
#include "texture/field_spectrum.h"
#include "texture/line_spectrum.h"
#include "texture/line_valleys.h"
#include "texture/top_view.h"
#include "texture/torn_area.h"
#include "texture/tracks.h"

namespace laygauge {

// What every metric gets: the patch, the coupon's drawing, and the lines found first.
struct Surface {
  const Patch* patch = nullptr;
  const CouponDescription* coupon = nullptr;
  FieldSpectrum spectrum;
  std::optional<Lines> lines;  // none: no periodic lines are visible
  std::string no_lines_reason;
  // Turned to `lines`, else to the coupon's nominal lay, else to 0 degrees.
  AlignedField aligned;
  // The same at half the scale (10 px/mm), for measures of slopes and of gray levels: what a point
  // spread of 0.06 mm holds, with a quarter of the pixels and half the noise.
  AlignedField aligned_half;
  LineValleys valleys;  // of `aligned`
  TornArea torn;
  TopView top;               // the whole top surface, at a lower scale, without torn areas
  std::vector<Track> scars;  // on `top`; none are looked for on a failed coupon
};

// Finds the lines, torn areas and scars, and turns the field. `patch` and `coupon` are kept by
// address: they must outlive the result.
[[nodiscard]] Surface MakeSurface(const Patch& patch, const CouponDescription& coupon);

}  // namespace laygauge
