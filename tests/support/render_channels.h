#pragma once

#include <functional>

#include "coupon/patch.h"

namespace laygauge {

// A flat, evenly lit coupon (SquareCoupon) with wholly dark channels along the lay, one every
// pitch, blurred; none on its walls. Exact: a box convolved with a Gaussian is a difference of two
// error functions.
struct ChannelsToRender {
  double pitch_mm = 0.4;
  double lay_deg = 45;
  double level = 0.4;
  double blur_sd_mm = 0.06;
  double noise_sd = 0;
  double px_per_mm = 20;
  // Darkness, mm, of the channel with this number at this place along the lay (from the coupon's
  // origin); channel 0 passes through the origin.
  std::function<double(int channel, double along_mm)> darkness_mm = {};
  // Reflectance of line `channel`'s top, between channels `channel` and `channel` + 1; 1 if empty.
  std::function<double(int channel, double along_mm)> top = {};
};

[[nodiscard]] Patch RenderChannels(const ChannelsToRender& channels);

// Share of the light that a wholly dark box of this width takes at `x_mm` from its middle.
[[nodiscard]] double BlurredBox(double x_mm, double width_mm, double blur_sd_mm);

}  // namespace laygauge
