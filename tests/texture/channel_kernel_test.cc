#include "texture/channel_kernel.h"

#include <gtest/gtest.h>

#include <array>

#include "support/render_channels.h"

namespace laygauge {
namespace {

std::array<float, ChannelKernel::kSamples> Profile(double width_mm, double offset, double gain) {
  std::array<float, ChannelKernel::kSamples> profile{};
  for (int i = 0; i < ChannelKernel::kSamples; ++i) {
    const double x = (i - ChannelKernel::kReach - offset) * 0.05;
    profile[static_cast<std::size_t>(i)] =
        static_cast<float>(gain * (1 - BlurredBox(x, width_mm, 0.06)));
  }
  return profile;
}

// The light that a wholly dark channel takes is its width, however narrow: the integral of a box
// convolved with a kernel of unit area (analytic).
TEST(ChannelKernel, MeasuresTheWidthOfADarkBox) {
  const ChannelKernel kernel(ChannelSdMm(0.06), 0.05);
  for (const double width_mm : {0.005, 0.02, 0.05, 0.08}) {
    for (const double offset : {-0.5, -0.25, 0.0, 0.375}) {
      const auto profile = Profile(width_mm, offset, 1);
      const ChannelFit fit = kernel.Fit(profile.data() + ChannelKernel::kReach, offset);
      // The kernel is that of a channel with rounded lips, 0.076 mm wide (0.022 mm times root 12):
      // a sharp box as narrow as 0.005 mm looks up to 9 % different through +-3 samples.
      EXPECT_NEAR(fit.darkness_um, 1000 * width_mm, 90 * width_mm) << width_mm << " " << offset;
      EXPECT_NEAR(fit.tilt_um, 0, 10 * width_mm) << width_mm << " " << offset;
      EXPECT_NEAR(fit.level, 1, 0.1 * width_mm / 0.08) << width_mm << " " << offset;
    }
  }
}

TEST(ChannelKernel, DoesNotDependOnExposure) {
  const ChannelKernel kernel(ChannelSdMm(0.06), 0.05);
  const auto one = Profile(0.03, 0.125, 1);
  const auto bright = Profile(0.03, 0.125, 1.4);
  const double um = kernel.Fit(one.data() + ChannelKernel::kReach, 0.125).darkness_um;
  // float rounding of the samples, 6e-8 of 1, times the fit's gain of about 200 um
  EXPECT_NEAR(kernel.Fit(bright.data() + ChannelKernel::kReach, 0.125).darkness_um, um, 1e-3);
}

}  // namespace
}  // namespace laygauge
