#pragma once

#include <array>
#include <opencv2/core.hpp>

namespace laygauge {

// The amplitudes of a narrow dark channel in a short profile across it.
struct ChannelFit {
  double darkness_um = 0;  // light that it takes, as the width of a wholly dark channel
  double tilt_um = 0;      // of the light: positive where the side of higher positions is brighter
  double level = 0;        // of the surface beside it
};

// Fits level - darkness * g(x) + tilt * x / sd * g(x) by least squares, where g is a Gaussian of
// unit area: an ideal channel much narrower than `sd` darkens a blurred image by its width times g
// (common fact: a box of width w convolved with a kernel of unit area has the area w). The third
// term takes up the bright and the dark flank that light from one side makes.
class ChannelKernel {
 public:
  static constexpr int kReach = 3;  // samples on either side
  static constexpr int kSamples = 2 * kReach + 1;

  // `sd_mm`: of the channel as it is seen, blur and rounded lips together. `step_mm`: of samples.
  ChannelKernel(double sd_mm, double step_mm);

  // `profile` points at the sample nearest to the channel's centre; `offset` is the centre's
  // distance from it in samples, -0.5 to 0.5. kReach samples on either side are read.
  [[nodiscard]] ChannelFit Fit(const float* profile, double offset) const;

 private:
  static constexpr int kPhases = 17;  // offsets -0.5, -0.4375 ... 0.5
  std::array<cv::Matx<double, 3, kSamples>, kPhases> inverse_;
};

// What the rounded lips of a channel add to the blur, as a Gaussian: its standard deviation, mm.
inline constexpr double kLipSdMm = 0.022;

// Of the resolution that patches are brought to, when a patch does not say: mm.
inline constexpr double kUsualBlurSdMm = 0.06;

// Standard deviation of a channel as it is seen in a patch of this blur (0: unknown), mm.
[[nodiscard]] double ChannelSdMm(double blur_sd_mm);

}  // namespace laygauge
