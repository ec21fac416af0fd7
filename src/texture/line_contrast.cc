#include "texture/line_contrast.h"

#include <cmath>
#include <complex>
#include <numbers>
#include <numeric>
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
  const double value = Agreement(amplitudes);
  if (!(value > 0)) {
    return {};
  }
  const auto sum = std::accumulate(amplitudes.begin(), amplitudes.end(), std::complex<double>());
  double residuals = 0;
  for (const auto& tile : amplitudes) {
    const double projected = (tile * std::conj(sum)).real() / std::abs(sum);
    residuals += std::pow(projected - value * std::abs(tile), 2);
  }
  return {value, std::sqrt(residuals) * value / std::abs(sum)};
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

namespace {

struct Centre {
  cv::Point2d at;  // cycles per mm
  double power = 0;
};

// Centre of power of the nine bins about a frequency: within 0.03 bins of a wave under a Hann
// window that lies within half a bin of the middle one.
Centre CentreOfPower(const FieldSpectrum& spectrum, const SpectrumTile& tile,
                     cv::Point2d frequency) {
  const int kx = static_cast<int>(std::lround(frequency.x / spectrum.bin_per_mm));
  const int ky = static_cast<int>(std::lround(frequency.y / spectrum.bin_per_mm));
  Centre centre;
  for (int y = ky - 1; y <= ky + 1; ++y) {
    for (int x = kx - 1; x <= kx + 1; ++x) {
      const double power = PowerAt(tile.power, x, y);
      centre.at += power * cv::Point2d(x, y);
      centre.power += power;
    }
  }
  if (centre.power > 0) centre.at *= spectrum.bin_per_mm / centre.power;
  return centre;
}

// Root of the weighted mean square about the weighted mean.
double WeightedDeviation(const std::vector<double>& values, const std::vector<double>& weights) {
  const double sum = std::accumulate(weights.begin(), weights.end(), 0.0);
  const double mean = std::inner_product(values.begin(), values.end(), weights.begin(), 0.0) / sum;
  double squares = 0;
  for (std::size_t i = 0; i < values.size(); ++i) {
    squares += weights[i] * (values[i] - mean) * (values[i] - mean);
  }
  return std::sqrt(squares / sum);
}

}  // namespace

LineScatter MeasureLineScatter(const FieldSpectrum& spectrum, const Lines& lines) {
  const double f = cv::norm(lines.frequency_per_mm);
  const cv::Point2d direction = lines.frequency_per_mm / f;
  std::vector<double> powers;
  std::vector<double> along;   // of a tile's centre of power, relative to the frequency
  std::vector<double> across;  // across the wave vector, the same
  for (const SpectrumTile& tile : spectrum.tiles) {
    const Centre centre = CentreOfPower(spectrum, tile, lines.frequency_per_mm);
    powers.push_back(centre.power);
    along.push_back(centre.at.dot(direction) / f);
    across.push_back(centre.at.cross(direction) / f);
  }
  const double weights = std::accumulate(powers.begin(), powers.end(), 0.0);
  if (!(weights > 0)) {
    return {};
  }
  const double squares = std::inner_product(powers.begin(), powers.end(), powers.begin(), 0.0);
  return {100 * WeightedDeviation(along, powers),
          WeightedDeviation(across, powers) * 180 / std::numbers::pi,
          std::sqrt(squares) / weights / std::numbers::sqrt2};
}

}  // namespace laygauge
