#pragma once

#include <cstdint>

#include "coupon/coupon_description.h"
#include "coupon/patch.h"

namespace laygauge {

// A made-up patch of printed lines: reflectance 1 + contrast * profile(phase), where the profile
// is dark in a narrow valley between lines. Everything is analytic, so that a test knows the truth.
struct LinesToRender {
  double pitch_mm = 0.42;
  double lay_deg = 45;    // counter-clockwise seen from above, as everywhere
  double first = 0.1;     // amplitude of the fundamental, cos(2 pi v / pitch)
  double second = 0;      // amplitude of the second harmonic, cos(4 pi v / pitch)
  double wander_mm = 0;   // standard deviation of each line's own offset across the lay
  double noise_sd = 0;    // white noise of each pixel
  double blur_sd_mm = 0;  // Gaussian point spread, after everything but the noise
  double px_per_mm = 20;
  double side_mm = 44;     // of the patch
  std::uint64_t seed = 1;  // of wander and noise
};

// A square coupon of 40 mm with holes of 6 mm at (9, -9) and 3.2 mm at (-10, 8); walls 0.9 mm.
[[nodiscard]] CouponDescription SquareCoupon();

// Regions of SquareCoupon(): field 3 mm from the outline and 2 mm from holes.
[[nodiscard]] cv::Mat SquareCouponRegions(double px_per_mm, double side_mm);

[[nodiscard]] Patch RenderLines(const LinesToRender& lines);

// Distance across the lay of a point from the coupon's origin, mm: what phases are counted in.
[[nodiscard]] double AcrossLay(cv::Point2d point_mm, double lay_deg);

}  // namespace laygauge
