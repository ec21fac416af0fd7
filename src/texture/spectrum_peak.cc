#include "texture/spectrum_peak.h"

#include <algorithm>
#include <cmath>
#include <vector>

namespace laygauge {
namespace {

// Vertex of the parabola through the logarithms of a peak and its two neighbours, in bins.
double Vertex(double before, double peak, double after) {
  if (!(before > 0 && peak > 0 && after > 0)) {
    return 0;
  }
  const double a = std::log(before);
  const double b = std::log(peak);
  const double c = std::log(after);
  const double curvature = a - 2 * b + c;
  return curvature < 0 ? std::clamp(0.5 * (a - c) / curvature, -0.5, 0.5) : 0;
}

}  // namespace

double PowerAt(const cv::Mat& power, int kx, int ky) {
  const int rows = power.rows;
  if (kx < 0) {
    kx = -kx;
    ky = -ky;
  }
  return power.at<float>(((ky % rows) + rows) % rows, std::min(kx, power.cols - 1));
}

cv::Point2d FrequencyOf(const FieldSpectrum& spectrum, double kx, double ky) {
  const double y = ky > spectrum.side_px / 2.0 ? ky - spectrum.side_px : ky;
  return {kx * spectrum.bin_per_mm, y * spectrum.bin_per_mm};
}

double PowerNear(const FieldSpectrum& spectrum, cv::Point2d frequency) {
  const int kx = static_cast<int>(std::lround(frequency.x / spectrum.bin_per_mm));
  const int ky = static_cast<int>(std::lround(frequency.y / spectrum.bin_per_mm));
  double power = 0;
  for (int y = ky - 1; y <= ky + 1; ++y) {
    for (int x = kx - 1; x <= kx + 1; ++x) {
      power = std::max(power, PowerAt(spectrum.power, x, y));
    }
  }
  return power;
}

Peak StrongestPeak(const FieldSpectrum& spectrum, double low_per_mm, double high_per_mm,
                   const std::function<bool(cv::Point2d)>& wanted) {
  Peak best;
  for (int ky = 0; ky < spectrum.power.rows; ++ky) {
    const auto* row = spectrum.power.ptr<float>(ky);
    for (int kx = 0; kx < spectrum.power.cols; ++kx) {
      if (row[kx] <= best.power) {
        continue;
      }
      const cv::Point2d f = FrequencyOf(spectrum, kx, ky);
      const double radius = std::hypot(f.x, f.y);
      if (radius >= low_per_mm && radius <= high_per_mm && wanted(f)) {
        best = {{kx, ky}, row[kx]};
      }
    }
  }
  return best;
}

double PeakRatio(const FieldSpectrum& spectrum, const Peak& peak) {
  constexpr double kReachBins = 1.5;
  const cv::Point2d at = FrequencyOf(spectrum, peak.bin.x, peak.bin.y) / spectrum.bin_per_mm;
  const double radius = std::hypot(at.x, at.y);
  const double outer = (radius + kReachBins) * (radius + kReachBins);
  const double inner = radius > kReachBins ? (radius - kReachBins) * (radius - kReachBins) : -1;
  std::vector<float> ring;
  for (int row = 0; row < spectrum.power.rows; ++row) {
    const double ky = row > spectrum.side_px / 2 ? row - spectrum.side_px : row;
    for (int kx = 0; kx < spectrum.power.cols; ++kx) {
      const double square = kx * kx + ky * ky;
      if (square > inner && square < outer) ring.push_back(spectrum.power.at<float>(row, kx));
    }
  }
  const auto middle = ring.begin() + static_cast<std::ptrdiff_t>(ring.size() / 2);
  std::nth_element(ring.begin(), middle, ring.end());
  return *middle > 0 ? peak.power / *middle : (peak.power > 0 ? 1e9 : 0);
}

cv::Point2d InterpolatedFrequency(const FieldSpectrum& spectrum, const cv::Mat& power,
                                  const Peak& peak) {
  const int x = peak.bin.x;
  const int y = peak.bin.y;
  const auto at = [&](int kx, int ky) { return PowerAt(power, kx, ky); };
  return FrequencyOf(spectrum, x, y) +
         spectrum.bin_per_mm * cv::Point2d(Vertex(at(x - 1, y), peak.power, at(x + 1, y)),
                                           Vertex(at(x, y - 1), peak.power, at(x, y + 1)));
}

}  // namespace laygauge
