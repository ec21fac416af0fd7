#include "texture/channel_kernel.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace laygauge {

double ChannelSdMm(double blur_sd_mm) {
  return std::hypot(blur_sd_mm > 0 ? blur_sd_mm : kUsualBlurSdMm, kLipSdMm);
}

ChannelKernel::ChannelKernel(double sd_mm, double step_mm) {
  for (int phase = 0; phase < kPhases; ++phase) {
    const double offset = static_cast<double>(phase) / (kPhases - 1) - 0.5;
    cv::Matx<double, kSamples, 3> design;
    for (int i = 0; i < kSamples; ++i) {
      const double x = (i - kReach - offset) * step_mm / sd_mm;
      const double g = std::exp(-0.5 * x * x) / (sd_mm * std::sqrt(2 * std::numbers::pi));
      design(i, 0) = 1;
      design(i, 1) = -g;
      design(i, 2) = g * x;
    }
    inverse_[static_cast<std::size_t>(phase)] = (design.t() * design).inv() * design.t();
  }
}

ChannelFit ChannelKernel::Fit(const float* profile, double offset) const {
  const double phase = std::clamp((offset + 0.5) * (kPhases - 1), 0.0, kPhases - 1.0);
  const auto& inverse = inverse_[static_cast<std::size_t>(std::lround(phase))];
  cv::Vec3d sum(0, 0, 0);
  for (int i = 0; i < kSamples; ++i) {
    const double value = profile[i - kReach];
    for (int k = 0; k < 3; ++k) {
      sum[k] += inverse(k, i) * value;
    }
  }
  constexpr double kUm = 1000;
  const double level = std::max(sum[0], 1e-6);
  return {sum[1] / level * kUm, sum[2] / level * kUm, sum[0]};
}

}  // namespace laygauge
