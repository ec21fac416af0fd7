#include "support/render_channels.h"

#include <cmath>
#include <numbers>
#include <random>

#include "support/render_lines.h"

namespace laygauge {

double BlurredBox(double x_mm, double width_mm, double blur_sd_mm) {
  const double scale = blur_sd_mm * std::numbers::sqrt2;
  return (std::erf((x_mm + width_mm / 2) / scale) - std::erf((x_mm - width_mm / 2) / scale)) / 2;
}

Patch RenderChannels(const ChannelsToRender& channels) {
  Patch patch;
  patch.px_per_mm = channels.px_per_mm;
  constexpr double kSideMm = 44;
  patch.regions = SquareCouponRegions(channels.px_per_mm, kSideMm);
  const int side = patch.regions.cols;
  patch.origin_px = {(side - 1) / 2.0, (side - 1) / 2.0};
  patch.level = channels.level;
  patch.blur_sd_mm = channels.blur_sd_mm;
  patch.noise_sd = channels.noise_sd;
  patch.relative.create(side, side, CV_32FC1);
  std::mt19937_64 random(1);
  std::normal_distribution<double> normal;
  const double lay = channels.lay_deg * std::numbers::pi / 180;
  for (int y = 0; y < side; ++y) {
    for (int x = 0; x < side; ++x) {
      const cv::Point2d p = patch.CouponFromPixel({static_cast<double>(x), static_cast<double>(y)});
      const double along = p.dot({std::cos(lay), -std::sin(lay)});
      const double across = AcrossLay(p, channels.lay_deg);
      const int nearest = static_cast<int>(std::lround(across / channels.pitch_mm));
      double value = 1;
      const auto region = static_cast<Region>(patch.regions.at<std::uint8_t>(y, x));
      if (region != Region::kField && region != Region::kMargin) {
        patch.relative.at<float>(y, x) = static_cast<float>(1 + channels.noise_sd * normal(random));
        continue;
      }
      if (channels.top) {
        value = channels.top(static_cast<int>(std::floor(across / channels.pitch_mm)), along);
      }
      for (int k = nearest - 1; k <= nearest + 1; ++k) {
        value -= BlurredBox(across - k * channels.pitch_mm, channels.darkness_mm(k, along),
                            channels.blur_sd_mm);
      }
      patch.relative.at<float>(y, x) =
          static_cast<float>(value + channels.noise_sd * normal(random));
    }
  }
  return patch;
}

}  // namespace laygauge
