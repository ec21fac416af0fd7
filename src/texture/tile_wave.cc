#include "texture/tile_wave.h"

#include <Eigen/Dense>
#include <algorithm>
#include <cmath>
#include <numbers>
#include <numeric>

#include "texture/spectrum_peak.h"

namespace laygauge {
namespace {

constexpr double kTwoPi = 2 * std::numbers::pi;

// Sums of the amplitudes, each turned back by the phase that a shift of the frequency gives at its
// tile, for all shifts (i, j) * step of a grid.
class ShiftedSums {
 public:
  ShiftedSums(const FieldSpectrum& spectrum, const Amplitudes& amplitudes, double step, int reach)
      : reach_(reach),
        by_x_(static_cast<std::size_t>(2 * reach + 1), amplitudes),
        by_y_(by_x_.size(), Amplitudes(amplitudes.size(), 1)) {
    for (std::size_t t = 0; t < amplitudes.size(); ++t) {
      const cv::Point2d turn = -kTwoPi * step * spectrum.tiles[t].centre_mm;
      TurnOnwards(t, turn.x, by_x_);
      TurnOnwards(t, turn.y, by_y_);
    }
  }

  [[nodiscard]] std::complex<double> At(int i, int j) const {
    const auto& by_x = by_x_[static_cast<std::size_t>(i + reach_)];
    const auto& by_y = by_y_[static_cast<std::size_t>(j + reach_)];
    return std::inner_product(by_x.begin(), by_x.end(), by_y.begin(), std::complex<double>(0));
  }

 private:
  // Turns the t-th value of every shift: by one step after the other, from the shift -reach on.
  void TurnOnwards(std::size_t t, double step_turn, std::vector<Amplitudes>& by_shift) const {
    const std::complex<double> step = std::polar(1.0, step_turn);
    std::complex<double> turn = std::polar(1.0, -reach_ * step_turn);
    for (Amplitudes& values : by_shift) {
      values[t] *= turn;
      turn *= step;
    }
  }

  int reach_;
  std::vector<Amplitudes> by_x_;  // amplitudes, turned by the shift along x
  std::vector<Amplitudes> by_y_;  // turns by the shift along y
};

// Weighted least squares of the tiles' phases about their mean: phase = c + 2 pi shift . x.
// Returns the shift; fills the wave's covariance.
cv::Point2d FitPhases(const FieldSpectrum& spectrum, const Amplitudes& amplitudes, Wave& wave) {
  const std::complex<double> sum =
      std::accumulate(amplitudes.begin(), amplitudes.end(), std::complex<double>(0));
  Eigen::Matrix3d normal = Eigen::Matrix3d::Zero();
  Eigen::Vector3d right = Eigen::Vector3d::Zero();
  double weights = 0;
  for (std::size_t t = 0; t < amplitudes.size(); ++t) {
    const cv::Point2d x = spectrum.tiles[t].centre_mm;
    const Eigen::Vector3d row(1, kTwoPi * x.x, kTwoPi * x.y);
    const double phase = std::arg(amplitudes[t] * std::conj(sum));
    const double weight = std::norm(amplitudes[t]);
    normal += weight * row * row.transpose();
    right += weight * phase * row;
    weights += weight;
  }
  const auto solver = normal.ldlt();
  if (amplitudes.size() < 4 || !(weights > 0) || !(solver.rcond() > 1e-12)) {
    return {};
  }
  const Eigen::Vector3d fit = solver.solve(right);
  double residuals = 0;
  for (std::size_t t = 0; t < amplitudes.size(); ++t) {
    const cv::Point2d x = spectrum.tiles[t].centre_mm;
    const double phase =
        std::arg(amplitudes[t] * std::conj(sum)) - fit[0] - kTwoPi * (fit[1] * x.x + fit[2] * x.y);
    residuals += std::norm(amplitudes[t]) * phase * phase;
  }
  const double count = static_cast<double>(amplitudes.size());
  const double variance = residuals / (count - 3) * std::sqrt(count);
  wave.covariance = variance * solver.solve(Eigen::Matrix3d::Identity()).bottomRightCorner<2, 2>();
  return {fit[1], fit[2]};
}

}  // namespace

double Agreement(const Amplitudes& amplitudes) {
  std::complex<double> sum = 0;
  double sum_abs = 0;
  for (const auto& a : amplitudes) {
    sum += a;
    sum_abs += std::abs(a);
  }
  return sum_abs > 0 ? std::abs(sum) / sum_abs : 0;
}

Amplitudes WithoutPhaseDrift(const FieldSpectrum& spectrum, const Amplitudes& amplitudes) {
  constexpr int kReach = 16;
  const double step = spectrum.bin_per_mm / (3 * kReach);
  const ShiftedSums sums(spectrum, amplitudes, step, kReach);
  cv::Point best;
  for (int i = -kReach; i <= kReach; ++i) {
    for (int j = -kReach; j <= kReach; ++j) {
      if (std::norm(sums.At(i, j)) > std::norm(sums.At(best.x, best.y))) best = {i, j};
    }
  }
  Amplitudes turned = amplitudes;
  for (std::size_t t = 0; t < turned.size(); ++t) {
    const cv::Point2d x = spectrum.tiles[t].centre_mm;
    turned[t] *= std::polar(1.0, -kTwoPi * step * (best.x * x.x + best.y * x.y));
  }
  return turned;
}

Amplitudes AmplitudesAt(const FieldSpectrum& spectrum, cv::Point2d frequency) {
  Amplitudes result;
  for (const auto& tile : DemodulateTiles(spectrum, frequency, 1)) {
    result.push_back(tile[0]);
  }
  return result;
}

std::vector<double> CoherentPowers(const FieldSpectrum& spectrum,
                                   const std::vector<cv::Point2d>& frequencies) {
  std::vector<std::complex<double>> sums(frequencies.size());
  for (const auto& tile : DemodulateTiles(spectrum, frequencies)) {
    for (std::size_t k = 0; k < sums.size(); ++k) sums[k] += tile[k];
  }
  std::vector<double> powers;
  for (const auto& sum : sums) powers.push_back(std::norm(sum));
  return powers;
}

namespace {

// Frequency of the strongest wave within two bins of a frequency.
cv::Point2d PeakNear(const FieldSpectrum& spectrum, cv::Point2d frequency) {
  constexpr int kReachBins = 2;
  const int kx = static_cast<int>(std::lround(frequency.x / spectrum.bin_per_mm));
  const int ky = static_cast<int>(std::lround(frequency.y / spectrum.bin_per_mm));
  Peak peak{{kx, ky}, -1};
  for (int y = ky - kReachBins; y <= ky + kReachBins; ++y) {
    for (int x = kx - kReachBins; x <= kx + kReachBins; ++x) {
      const double power = PowerAt(spectrum.power, x, y);
      if (power > peak.power) peak = {{x, y}, power};
    }
  }
  return InterpolatedFrequency(spectrum, spectrum.power, peak);
}

}  // namespace

AgreedWave FindAgreedWave(const FieldSpectrum& spectrum, cv::Point2d coarse, double high_per_mm) {
  constexpr int kSteps = 6;
  const int harmonics = 2 * cv::norm(coarse) <= high_per_mm ? 2 : 1;
  std::vector<Amplitudes> amplitudes(harmonics);
  std::vector<double> powers(harmonics, 1e-300);
  for (const auto& tile : DemodulateTiles(spectrum, coarse, harmonics)) {
    for (int h = 0; h < harmonics; ++h) {
      amplitudes[h].push_back(tile[h]);
      powers[h] += std::norm(tile[h]) * static_cast<double>(spectrum.tiles.size());
    }
  }
  const cv::Point2d second = harmonics == 2 ? PeakNear(spectrum, 2 * coarse) : cv::Point2d();
  const double step = spectrum.bin_per_mm / (2 * kSteps);
  std::vector<ShiftedSums> sums;
  for (int h = 0; h < harmonics; ++h) {
    sums.emplace_back(spectrum, amplitudes[h], (h + 1) * step, kSteps);
  }
  AgreedWave best;
  double best_sum = -1;
  for (int i = -kSteps; i <= kSteps; ++i) {
    for (int j = -kSteps; j <= kSteps; ++j) {
      const cv::Point2d shift = step * cv::Point2d(i, j);
      double sum = 0;
      double better = 0;
      // Tiles in steps agree on a sharp wave's aliases, too: the second harmonic counts only where
      // its own power is.
      const double off = cv::norm(2 * (coarse + shift) - second);
      const int counting = harmonics == 2 && off > spectrum.bin_per_mm / 2 ? 1 : harmonics;
      for (int h = 0; h < counting; ++h) {
        const double agreement = std::norm(sums[h].At(i, j)) / powers[h];
        sum += agreement;
        better = std::max(better, agreement);
      }
      if (sum > best_sum) {
        best_sum = sum;
        best = {coarse + shift, better};
      }
    }
  }
  return best;
}

Wave RefineWave(const FieldSpectrum& spectrum, cv::Point2d start) {
  Wave wave{start};
  for (int pass = 0; pass < 2; ++pass) {
    wave.frequency += FitPhases(spectrum, AmplitudesAt(spectrum, wave.frequency), wave);
  }
  return wave;
}

}  // namespace laygauge
