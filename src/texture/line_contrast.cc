#include "texture/line_contrast.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <vector>

#include "base/statistics.h"
#include "texture/spectrum_peak.h"
#include "texture/tile_wave.h"

namespace laygauge {

namespace {

struct AgreementOfTiles {
  double value = 0;
  double sd = 0;
};

AgreementOfTiles MeasureAgreement(const Amplitudes& amplitudes) {
  std::complex<double> sum = 0;
  double sum_abs = 0;
  for (const auto& tile : amplitudes) {
    sum += tile;
    sum_abs += std::abs(tile);
  }
  if (!(sum_abs > 0)) {
    return {};
  }
  const double value = Agreement(amplitudes);
  double residuals = 0;
  for (const auto& tile : amplitudes) {
    const double projected = (tile * std::conj(sum)).real() / std::max(std::abs(sum), 1e-300);
    residuals += std::pow(projected - value * std::abs(tile), 2);
  }
  return {value, std::sqrt(residuals) / sum_abs};
}

}  // namespace

LineContrast MeasureLineContrast(const FieldSpectrum& spectrum, const Lines& lines) {
  constexpr int kHarmonics = 3;
  const auto amplitudes = DemodulateTiles(spectrum, lines.frequency_per_mm, kHarmonics);
  const double count = static_cast<double>(amplitudes.size());
  std::vector<std::vector<double>> squares(kHarmonics + 1);
  Amplitudes fundamentals;
  for (const auto& tile : amplitudes) {
    double total = 0;
    for (int h = 0; h < kHarmonics; ++h) {
      squares[h].push_back(std::norm(tile[h]));
      total += std::norm(tile[h]);
    }
    squares[kHarmonics].push_back(total);
    fundamentals.push_back(tile[0]);
  }
  const auto rms = [&](int h) { return std::sqrt(Mean(squares[h])); };
  const auto sd = [&](int h) {
    const double value = rms(h);
    return value > 0 ? StandardDeviation(squares[h]) / std::sqrt(count) / (2 * value) : 0;
  };
  const AgreementOfTiles agreement = MeasureAgreement(WithoutPhaseDrift(spectrum, fundamentals));
  return {rms(0), rms(1), rms(2), rms(3), sd(0), sd(1), sd(3), agreement.value, agreement.sd};
}

LineScatter MeasureLineScatter(const FieldSpectrum& spectrum, const Lines& lines) {
  const double f = cv::norm(lines.frequency_per_mm);
  const int kx = static_cast<int>(std::lround(lines.frequency_per_mm.x / spectrum.bin_per_mm));
  const int ky = static_cast<int>(std::lround(lines.frequency_per_mm.y / spectrum.bin_per_mm));
  double pitch_squares = 0;
  double lay_squares = 0;
  double weights = 0;
  double weight_squares = 0;
  for (const SpectrumTile& tile : spectrum.tiles) {
    Peak peak;
    for (int y = ky - 1; y <= ky + 1; ++y) {
      for (int x = std::max(0, kx - 1); x <= kx + 1; ++x) {
        const double power = PowerAt(tile.power, x, y);
        if (power > peak.power) {
          peak = {{x, (y + spectrum.side_px) % spectrum.side_px}, power};
        }
      }
    }
    const cv::Point2d at = InterpolatedFrequency(spectrum, tile.power, peak);
    const double along = at.dot(lines.frequency_per_mm) / f;
    const double across = at.cross(lines.frequency_per_mm) / f;
    const double pitch_pct = 100 * (f / std::hypot(along, across) - 1);
    const double lay_deg = std::atan2(across, along) * 180 / std::numbers::pi;
    pitch_squares += peak.power * pitch_pct * pitch_pct;
    lay_squares += peak.power * lay_deg * lay_deg;
    weights += peak.power;
    weight_squares += peak.power * peak.power;
  }
  if (!(weights > 0)) {
    return {};
  }
  const double effective_tiles = weights * weights / weight_squares;
  return {std::sqrt(pitch_squares / weights), std::sqrt(lay_squares / weights),
          1 / std::sqrt(2 * effective_tiles)};
}

}  // namespace laygauge
