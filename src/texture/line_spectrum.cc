#include "texture/line_spectrum.h"

#include <fmt/format.h>

#include <Eigen/Dense>
#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <vector>

#include "base/statistics.h"

namespace laygauge {
namespace {

constexpr double kTwoPi = 2 * std::numbers::pi;
constexpr double kFinestHarmonicPerMm = 7.5;

struct Peak {
  cv::Point bin;  // (kx, ky) of FieldSpectrum::power
  double power = 0;
};

// Row of the half plane that holds ky, and its value at (kx, ky), which may lie in the other half.
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

double LayOf(cv::Point2d frequency) {
  // The lines run at right angles to their wave vector; the image's y points down.
  const double lay = std::atan2(frequency.x, frequency.y) * 180 / std::numbers::pi;
  return std::fmod(lay + 360, 180);
}

// Smallest angle between two directions, degrees, 0..90.
double AngleBetween(double lay_a_deg, double lay_b_deg) {
  const double difference = std::fmod(std::abs(lay_a_deg - lay_b_deg), 180);
  return std::min(difference, 180 - difference);
}

// The strongest bin within the band for which `wanted(frequency)` holds.
template <class Wanted>
Peak StrongestPeak(const FieldSpectrum& spectrum, double low_per_mm, double high_per_mm,
                   Wanted wanted) {
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

// Power over the median of the bins at the same distance from zero, one and a half bins wide.
double PeakRatio(const FieldSpectrum& spectrum, const Peak& peak) {
  const cv::Point2d at = FrequencyOf(spectrum, peak.bin.x, peak.bin.y);
  const double radius = std::hypot(at.x, at.y);
  std::vector<float> ring;
  for (int ky = 0; ky < spectrum.power.rows; ++ky) {
    for (int kx = 0; kx < spectrum.power.cols; ++kx) {
      const cv::Point2d f = FrequencyOf(spectrum, kx, ky);
      if (std::abs(std::hypot(f.x, f.y) - radius) < 1.5 * spectrum.bin_per_mm) {
        ring.push_back(spectrum.power.at<float>(ky, kx));
      }
    }
  }
  const auto middle = ring.begin() + static_cast<std::ptrdiff_t>(ring.size() / 2);
  std::nth_element(ring.begin(), middle, ring.end());
  return *middle > 0 ? peak.power / *middle : (peak.power > 0 ? 1e9 : 0);
}

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

cv::Point2d InterpolatedFrequency(const FieldSpectrum& spectrum, const cv::Mat& power,
                                  const Peak& peak) {
  const int x = peak.bin.x;
  const int y = peak.bin.y;
  const auto at = [&](int kx, int ky) { return PowerAt(power, kx, ky); };
  return FrequencyOf(spectrum, x, y) +
         spectrum.bin_per_mm * cv::Point2d(Vertex(at(x - 1, y), peak.power, at(x + 1, y)),
                                           Vertex(at(x, y - 1), peak.power, at(x, y + 1)));
}

// What the tiles say about a wave near one frequency.
struct Wave {
  cv::Point2d frequency;
  Eigen::Matrix2d covariance = Eigen::Matrix2d::Zero();  // of the frequency
  double agreement = 0;                                  // of the tiles
};

using Amplitudes = std::vector<std::complex<double>>;

// |sum| / sum of absolute values: 1 if all phases are equal.
double Agreement(const Amplitudes& amplitudes) {
  std::complex<double> sum = 0;
  double sum_abs = 0;
  for (const auto& a : amplitudes) {
    sum += a;
    sum_abs += std::abs(a);
  }
  return sum_abs > 0 ? std::abs(sum) / sum_abs : 0;
}

Amplitudes AmplitudesAt(const FieldSpectrum& spectrum, cv::Point2d frequency) {
  Amplitudes result;
  for (const auto& tile : DemodulateTiles(spectrum, frequency, 1)) {
    result.push_back(tile[0]);
  }
  return result;
}

// Sum of the amplitudes, each turned back by the phase that `shift` gives at its tile.
std::complex<double> CoherentSum(const FieldSpectrum& spectrum, const Amplitudes& amplitudes,
                                 cv::Point2d shift) {
  std::complex<double> sum = 0;
  for (std::size_t t = 0; t < amplitudes.size(); ++t) {
    sum += amplitudes[t] * std::polar(1.0, -kTwoPi * shift.dot(spectrum.tiles[t].centre_mm));
  }
  return sum;
}

// The shift, within half a bin, at which the tiles agree best on the wave and its second harmonic:
// a grid of a twelfth of a bin. Each harmonic counts by its agreement, not by its strength, as a
// strong fundamental may be spread by the lines' wander while a faint harmonic is sharp.
cv::Point2d BestShift(const FieldSpectrum& spectrum, cv::Point2d coarse, double high_per_mm) {
  constexpr int kSteps = 6;
  const int harmonics = 2 * cv::norm(coarse) <= high_per_mm ? 2 : 1;
  const auto tiles = DemodulateTiles(spectrum, coarse, harmonics);
  std::vector<Amplitudes> amplitudes(harmonics);
  std::vector<double> powers(harmonics, 1e-300);
  for (const auto& tile : tiles) {
    for (int h = 0; h < harmonics; ++h) {
      amplitudes[h].push_back(tile[h]);
      powers[h] += std::norm(tile[h]);
    }
  }
  cv::Point2d best;
  double best_agreement = -1;
  for (int i = -kSteps; i <= kSteps; ++i) {
    for (int j = -kSteps; j <= kSteps; ++j) {
      const cv::Point2d shift = spectrum.bin_per_mm / (2 * kSteps) * cv::Point2d(i, j);
      double agreement = 0;
      for (int h = 0; h < harmonics; ++h) {
        agreement += std::norm(CoherentSum(spectrum, amplitudes[h], (h + 1.0) * shift)) / powers[h];
      }
      if (agreement > best_agreement) {
        best_agreement = agreement;
        best = shift;
      }
    }
  }
  return best;
}

// Weighted least squares of the tiles' phases about their mean: phase = c + 2 pi shift . x.
// Returns the shift; fills the wave's covariance.
cv::Point2d FitPhases(const FieldSpectrum& spectrum, const Amplitudes& amplitudes, Wave& wave) {
  const std::complex<double> sum = CoherentSum(spectrum, amplitudes, {});
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
  // Tiles along one line share its wander: a row of them counts as one tile.
  const double count = static_cast<double>(amplitudes.size());
  const double variance = residuals / (count - 3) * std::sqrt(count);
  wave.covariance = variance * solver.solve(Eigen::Matrix3d::Identity()).bottomRightCorner<2, 2>();
  return {fit[1], fit[2]};
}

// The wave nearest to `start` (within half a bin) that the tiles agree on.
Wave RefineWave(const FieldSpectrum& spectrum, cv::Point2d start) {
  Wave wave{start};
  for (int pass = 0; pass < 2; ++pass) {
    wave.frequency += FitPhases(spectrum, AmplitudesAt(spectrum, wave.frequency), wave);
  }
  return wave;
}

Wave FindWave(const FieldSpectrum& spectrum, const Peak& peak, double high_per_mm) {
  const cv::Point2d coarse = InterpolatedFrequency(spectrum, spectrum.power, peak);
  return RefineWave(spectrum, coarse + BestShift(spectrum, coarse, high_per_mm));
}

double CoherentPower(const FieldSpectrum& spectrum, cv::Point2d frequency) {
  return std::norm(CoherentSum(spectrum, AmplitudesAt(spectrum, frequency), {}));
}

// The strongest of the nine bins about a frequency.
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

// Whether the wave at 1 / `divisor` of a strong one is the lines' fundamental: it agrees over the
// field far better than its neighbourhood on the same ray, and is not faint. A faint one is the
// alternation of lines laid to and fro; it counts only where the strong one would be too fine for
// a nozzle.
bool IsOverDivisor(const FieldSpectrum& spectrum, cv::Point2d strong, int divisor,
                   const LineSpectrumOptions& options) {
  constexpr double kFineMm = 0.28;
  const cv::Point2d low = strong / static_cast<double>(divisor);
  const double pitch_mm = 1 / std::hypot(low.x, low.y);
  if (pitch_mm > options.max_pitch_mm || pitch_mm < options.min_pitch_mm) {
    return false;
  }
  // The mean of powers bounds the power of the mean: most strong waves need no closer look.
  const double least = pitch_mm / divisor < kFineMm ? 0.1 : 0.3;
  if (PowerNear(spectrum, low) < 0.5 * least * least * PowerNear(spectrum, strong)) {
    return false;
  }
  double around = 0;
  for (const double offset : {-0.16, -0.12, -0.08, 0.08, 0.12, 0.16}) {
    around += CoherentPower(spectrum, low * (1 + offset)) / 6;
  }
  const double power = CoherentPower(spectrum, low);
  return power > 8 * around && power > least * least * CoherentPower(spectrum, strong);
}

// The fundamental's frequency, given that of the strongest peak; none: the peak is too fine for
// lines and no harmonic of any.
std::optional<cv::Point2d> Fundamental(const FieldSpectrum& spectrum, cv::Point2d strong,
                                       const LineSpectrumOptions& options) {
  for (const int divisor : {3, 2}) {
    if (IsOverDivisor(spectrum, strong, divisor, options)) {
      return strong / static_cast<double>(divisor);
    }
  }
  if (std::hypot(strong.x, strong.y) > 1 / options.min_pitch_mm) {
    return std::nullopt;
  }
  return strong;
}

// Frequency from the fundamental and its harmonics, each weighted by the inverse of its
// covariance; the covariance is the best one's, as the lines' wander moves them alike.
Wave JoinHarmonics(const FieldSpectrum& spectrum, cv::Point2d fundamental, double high_per_mm) {
  Eigen::Matrix2d information = Eigen::Matrix2d::Zero();
  Eigen::Vector2d weighted = Eigen::Vector2d::Zero();
  Wave best{fundamental};
  for (const int harmonic : {1, 2}) {
    const double k = harmonic;
    if (k * std::hypot(fundamental.x, fundamental.y) > high_per_mm) {
      break;
    }
    Wave wave = RefineWave(spectrum, k * fundamental);
    wave.frequency /= k;
    wave.covariance /= k * k;
    const double moved = cv::norm(wave.frequency - fundamental) * k;
    const bool usable = wave.covariance.trace() > 0 && moved < 0.25 * spectrum.bin_per_mm;
    if (!usable) {
      continue;
    }
    const Eigen::Matrix2d inverse = wave.covariance.inverse();
    information += inverse;
    weighted += inverse * Eigen::Vector2d(wave.frequency.x, wave.frequency.y);
    if (best.covariance.trace() == 0 || wave.covariance.trace() < best.covariance.trace()) {
      best = wave;
    }
  }
  if (best.covariance.trace() > 0) {
    const Eigen::Vector2d joined = information.inverse() * weighted;
    best.frequency = {joined[0], joined[1]};
  }
  best.agreement = Agreement(AmplitudesAt(spectrum, best.frequency));
  return best;
}

// Number of tiles in which the wave at `other` outweighs that at `top`.
int LeadingTiles(const FieldSpectrum& spectrum, cv::Point2d other, cv::Point2d top) {
  const Amplitudes of_other = AmplitudesAt(spectrum, other);
  const Amplitudes of_top = AmplitudesAt(spectrum, top);
  int leads = 0;
  for (std::size_t t = 0; t < of_top.size(); ++t) {
    leads += std::abs(of_other[t]) > std::abs(of_top[t]) ? 1 : 0;
  }
  return leads;
}

// Whether lines that lead in a share of the tiles are the top's: where both directions cover much,
// the drawing's lay decides if it fits one of them and not the other.
bool SecondIsTop(double first_lay_deg, double second_lay_deg, double second_share,
                 const LineSpectrumOptions& options) {
  constexpr double kMuch = 0.25;
  constexpr double kFitsDeg = 10;
  if (options.nominal_lay_deg && std::abs(second_share - 0.5) < 0.5 - kMuch) {
    const bool first_fits = AngleBetween(*options.nominal_lay_deg, first_lay_deg) < kFitsDeg;
    const bool second_fits = AngleBetween(*options.nominal_lay_deg, second_lay_deg) < kFitsDeg;
    if (first_fits != second_fits) {
      return second_fits;
    }
  }
  return second_share > 0.5;
}

Lines Describe(const Wave& wave, double peak_ratio) {
  Lines lines;
  lines.frequency_per_mm = wave.frequency.x < 0 ? -wave.frequency : wave.frequency;
  const double f = std::hypot(wave.frequency.x, wave.frequency.y);
  const Eigen::Vector2d along(wave.frequency.x / f, wave.frequency.y / f);
  const Eigen::Vector2d across(-along[1], along[0]);
  lines.pitch_mm = 1 / f;
  lines.lay_deg = LayOf(wave.frequency);
  lines.pitch_sd_mm = std::sqrt(along.dot(wave.covariance * along)) / (f * f);
  lines.lay_sd_deg = std::sqrt(across.dot(wave.covariance * across)) / f * 180 / std::numbers::pi;
  lines.phase_agreement = wave.agreement;
  lines.peak_ratio = peak_ratio;
  return lines;
}

// Looks for lines of another direction and tells which are the top's.
Lines WithSecondLay(const FieldSpectrum& spectrum, const Wave& first, double ratio,
                    const LineSpectrumOptions& options) {
  const double f = cv::norm(first.frequency);
  const double first_lay = LayOf(first.frequency);
  const Peak peak =
      StrongestPeak(spectrum, std::max(1 / options.max_pitch_mm, 0.7 * f),
                    std::min(1 / options.min_pitch_mm, 1.4 * f), [&](cv::Point2d at) {
                      return AngleBetween(LayOf(at), first_lay) >= options.min_second_lay_deg;
                    });
  const double second_ratio = peak.power > 0 ? PeakRatio(spectrum, peak) : 0;
  Lines lines = Describe(first, ratio);
  if (second_ratio < options.min_peak_ratio) {
    return lines;
  }
  const Wave second = FindWave(spectrum, peak, 1 / options.min_pitch_mm);
  // A scar's straight edge is a wave of all frequencies in one direction; it leads nowhere.
  constexpr int kLeastTiles = 2;
  const int leads = LeadingTiles(spectrum, second.frequency, first.frequency);
  const double share = static_cast<double>(leads) / static_cast<double>(spectrum.tiles.size());
  if (leads < kLeastTiles) {
    return lines;
  }
  if (SecondIsTop(first_lay, LayOf(second.frequency), share, options)) {
    lines =
        Describe(JoinHarmonics(spectrum, second.frequency, 1 / options.min_pitch_mm), second_ratio);
    lines.second_lay = SecondLay{first_lay, 1 - share};
  } else {
    lines.second_lay = SecondLay{LayOf(second.frequency), share};
  }
  return lines;
}

}  // namespace

void LineSpectrumOptions::Check() const {
  if (!(min_pitch_mm > 0 && min_pitch_mm < max_pitch_mm)) {
    throw BadOption(fmt::format("min_pitch_mm is {}: it must be above 0 and below max_pitch_mm, {}",
                                min_pitch_mm, max_pitch_mm));
  }
  if (!(min_peak_ratio >= 3)) {
    throw BadOption(
        fmt::format("min_peak_ratio is {}: it must be 3 at least, above noise", min_peak_ratio));
  }
  if (!(min_contrast >= 0 && min_contrast < 1)) {
    throw BadOption(fmt::format("min_contrast is {}: it must be within 0..1", min_contrast));
  }
  if (!(min_second_lay_deg > 0 && min_second_lay_deg <= 90)) {
    throw BadOption(
        fmt::format("min_second_lay_deg is {}: it must be within 0..90", min_second_lay_deg));
  }
}

Expected<Lines> FindLines(const FieldSpectrum& spectrum, const LineSpectrumOptions& options) {
  options.Check();
  if (spectrum.tiles.empty()) {
    return Unmeasurable(
        fmt::format("the field holds no whole tile of {:.1f} mm: lines need a wider field",
                    1 / spectrum.bin_per_mm));
  }
  const double low = 1 / options.max_pitch_mm;
  // A harmonic may outweigh its fundamental: the search reaches beyond the finest pitch.
  const double limit = std::min(kFinestHarmonicPerMm, 0.4 * spectrum.px_per_mm);
  const Peak peak = StrongestPeak(spectrum, low, limit, [](cv::Point2d) { return true; });
  const double ratio = peak.power > 0 ? PeakRatio(spectrum, peak) : 0;
  if (ratio < options.min_peak_ratio) {
    return Unmeasurable(fmt::format(
        "no lines show between {} and {} mm pitch: the strongest wave is {:.1f} times its "
        "surroundings, {} are needed",
        options.min_pitch_mm, options.max_pitch_mm, ratio, options.min_peak_ratio));
  }
  const cv::Point2d coarse = InterpolatedFrequency(spectrum, spectrum.power, peak);
  const cv::Point2d strong = coarse + BestShift(spectrum, coarse, limit);
  const std::optional<cv::Point2d> fundamental = Fundamental(spectrum, strong, options);
  if (!fundamental) {
    return Unmeasurable(fmt::format(
        "the strongest wave, {:.3f} mm, is finer than the finest pitch, {} mm, and no harmonic",
        1 / cv::norm(strong), options.min_pitch_mm));
  }
  Lines lines =
      WithSecondLay(spectrum, JoinHarmonics(spectrum, *fundamental, limit), ratio, options);
  const double contrast = MeasureLineContrast(spectrum, lines).total;
  if (contrast < options.min_contrast) {
    return Unmeasurable(fmt::format(
        "the strongest wave, {:.3f} mm, has an amplitude of {:.4f} of the mean reflectance: below "
        "{} it may be the camera's grid and not lines",
        lines.pitch_mm, contrast, options.min_contrast));
  }
  return lines;
}

LineContrast MeasureLineContrast(const FieldSpectrum& spectrum, const Lines& lines) {
  constexpr int kHarmonics = 3;
  const auto amplitudes = DemodulateTiles(spectrum, lines.frequency_per_mm, kHarmonics);
  const double count = static_cast<double>(amplitudes.size());
  std::vector<std::vector<double>> squares(kHarmonics + 1);
  std::complex<double> sum = 0;
  double sum_abs = 0;
  for (const auto& tile : amplitudes) {
    double total = 0;
    for (int h = 0; h < kHarmonics; ++h) {
      squares[h].push_back(std::norm(tile[h]));
      total += std::norm(tile[h]);
    }
    squares[kHarmonics].push_back(total);
    sum += tile[0];
    sum_abs += std::abs(tile[0]);
  }
  const auto rms = [&](int h) { return std::sqrt(Mean(squares[h])); };
  const auto sd = [&](int h) {
    const double value = rms(h);
    return value > 0 ? StandardDeviation(squares[h]) / std::sqrt(count) / (2 * value) : 0;
  };
  double residuals = 0;
  const double agreement = sum_abs > 0 ? std::abs(sum) / sum_abs : 0;
  for (const auto& tile : amplitudes) {
    const double projected = (tile[0] * std::conj(sum)).real() / std::max(std::abs(sum), 1e-300);
    residuals += std::pow(projected - agreement * std::abs(tile[0]), 2);
  }
  return {rms(0), rms(1), rms(2), rms(3),
          sd(0),  sd(1),  sd(3),  sum_abs > 0 ? std::sqrt(residuals) / sum_abs : 0};
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
