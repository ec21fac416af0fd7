#include "texture/line_spectrum.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>

namespace laygauge {
namespace {

struct Peak {
  cv::Point2d frequency;  // cycles per mm, image axes
  double power = 0;
};

cv::Point2d FrequencyOf(const FieldSpectrum& spectrum, int ky, int kx) {
  const int y = ky > spectrum.side_px / 2 ? ky - spectrum.side_px : ky;
  return {kx * spectrum.bin_per_mm, y * spectrum.bin_per_mm};
}

Peak StrongestPeak(const FieldSpectrum& spectrum, double low_per_mm, double high_per_mm) {
  Peak best;
  for (int ky = 0; ky < spectrum.power.rows; ++ky) {
    for (int kx = 0; kx < spectrum.power.cols; ++kx) {
      const cv::Point2d f = FrequencyOf(spectrum, ky, kx);
      const double radius = std::hypot(f.x, f.y);
      const double power = spectrum.power.at<float>(ky, kx);
      if (radius >= low_per_mm && radius <= high_per_mm && power > best.power) {
        best = {f, power};
      }
    }
  }
  return best;
}

double RingMedian(const FieldSpectrum& spectrum, double radius_per_mm) {
  std::vector<float> ring;
  for (int ky = 0; ky < spectrum.power.rows; ++ky) {
    for (int kx = 0; kx < spectrum.power.cols; ++kx) {
      const cv::Point2d f = FrequencyOf(spectrum, ky, kx);
      if (std::abs(std::hypot(f.x, f.y) - radius_per_mm) < 1.5 * spectrum.bin_per_mm) {
        ring.push_back(spectrum.power.at<float>(ky, kx));
      }
    }
  }
  std::nth_element(ring.begin(), ring.begin() + ring.size() / 2, ring.end());
  return ring[ring.size() / 2];
}

}  // namespace

void LineSpectrumOptions::Check() const {
  if (!(min_pitch_mm > 0 && min_pitch_mm < max_pitch_mm)) {
    throw BadOption(
        fmt::format("min_pitch_mm is {}: it must be above 0 and below max_pitch_mm", min_pitch_mm));
  }
}

Expected<Lines> FindLines(const Patch& patch, const FieldSpectrum& spectrum,
                          const LineSpectrumOptions& options) {
  options.Check();
  (void)patch;
  if (spectrum.tiles.empty()) {
    return Unmeasurable("the coupon's field is smaller than one tile of the line spectrum");
  }
  const Peak peak = StrongestPeak(spectrum, 1 / options.max_pitch_mm, 1 / options.min_pitch_mm);
  const double radius = std::hypot(peak.frequency.x, peak.frequency.y);
  const double ratio = radius > 0 ? peak.power / RingMedian(spectrum, radius) : 0;
  if (ratio < options.min_peak_ratio) {
    return Unmeasurable("no lines are visible in the field");
  }
  // The lines run at right angles to their wave vector; the image's y points down.
  const double lay =
      std::fmod(std::atan2(peak.frequency.x, peak.frequency.y) * 180 / std::numbers::pi + 360, 180);
  return Lines{1 / radius, lay, ratio};
}

}  // namespace laygauge
