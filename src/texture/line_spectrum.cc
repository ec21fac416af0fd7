#include "texture/line_spectrum.h"

#include <fmt/format.h>

#include <Eigen/Dense>
#include <algorithm>
#include <cmath>
#include <numbers>
#include <numeric>
#include <vector>

#include "texture/line_contrast.h"
#include "texture/spectrum_peak.h"
#include "texture/tile_wave.h"

namespace laygauge {
namespace {

constexpr double kFinestHarmonicPerMm = 7.5;

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

struct StrongWave {
  AgreedWave wave;
  double ratio = 0;  // PeakRatio; of the strongest peak where none is high enough
};

// The strongest peak on which the tiles agree. Wander spreads a wave of lines over the ray of its
// direction, on which maxima arise that belong to no line: tiles agree on those by chance.
StrongWave FindStrongWave(const FieldSpectrum& spectrum, double low_per_mm, double high_per_mm,
                          double min_ratio) {
  constexpr int kPeaks = 12;
  constexpr double kApartBins = 2.5;
  constexpr double kEnoughAgreement = 0.8;
  std::vector<cv::Point2d> seen;
  StrongWave best;
  for (int i = 0; i < kPeaks; ++i) {
    const Peak peak = StrongestPeak(spectrum, low_per_mm, high_per_mm, [&](cv::Point2d f) {
      return std::none_of(seen.begin(), seen.end(), [&](cv::Point2d other) {
        const double apart = std::min(cv::norm(f - other), cv::norm(f + other));
        return apart < kApartBins * spectrum.bin_per_mm;
      });
    });
    seen.push_back(FrequencyOf(spectrum, peak.bin.x, peak.bin.y));
    const double ratio = peak.power > 0 ? PeakRatio(spectrum, peak) : 0;
    if (ratio < min_ratio) {
      best.ratio = i == 0 ? ratio : best.ratio;
      continue;
    }
    const AgreedWave wave = FindAgreedWave(
        spectrum, InterpolatedFrequency(spectrum, spectrum.power, peak), high_per_mm);
    if (wave.agreement > best.wave.agreement) {
      best = {wave, ratio};
    }
    if (wave.agreement >= kEnoughAgreement) {
      break;
    }
  }
  return best;
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
  const std::vector<double> powers = CoherentPowers(
      spectrum,
      {low, strong, 0.84 * low, 0.88 * low, 0.92 * low, 1.08 * low, 1.12 * low, 1.16 * low});
  const double around = std::accumulate(powers.begin() + 2, powers.end(), 0.0) / 6;
  return powers[0] > 8 * around && powers[0] > least * least * powers[1];
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
  if (cv::norm(strong) <= 1 / options.min_pitch_mm) {
    return strong;
  }
  // Too fine for lines: their second harmonic, if anything stands out at its half, however blurred
  // by wander; else the camera's grid beats with ironed tracks.
  const cv::Point2d half = strong / 2.0;
  const cv::Point bin(static_cast<int>(std::lround(std::abs(half.x) / spectrum.bin_per_mm)),
                      static_cast<int>(std::lround(std::abs(half.y) / spectrum.bin_per_mm)));
  const bool stands_out =
      PeakRatio(spectrum, {bin, PowerNear(spectrum, half)}) >= options.min_peak_ratio;
  return stands_out ? std::optional(half) : std::nullopt;
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
  const Wave second = RefineWave(
      spectrum, FindAgreedWave(spectrum, InterpolatedFrequency(spectrum, spectrum.power, peak),
                               1 / options.min_pitch_mm)
                    .frequency);
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
  const StrongWave strong = FindStrongWave(spectrum, low, limit, options.min_peak_ratio);
  if (strong.ratio < options.min_peak_ratio) {
    return Unmeasurable(fmt::format(
        "no lines show between {} and {} mm pitch: the strongest wave is {:.1f} times its "
        "surroundings, {} are needed",
        options.min_pitch_mm, options.max_pitch_mm, strong.ratio, options.min_peak_ratio));
  }
  const std::optional<cv::Point2d> fundamental =
      Fundamental(spectrum, strong.wave.frequency, options);
  if (!fundamental) {
    return Unmeasurable(fmt::format(
        "the strongest wave, {:.3f} mm, is finer than the finest pitch, {} mm, and no harmonic",
        1 / cv::norm(strong.wave.frequency), options.min_pitch_mm));
  }
  Lines lines =
      WithSecondLay(spectrum, JoinHarmonics(spectrum, *fundamental, limit), strong.ratio, options);
  const double contrast = MeasureLineContrast(spectrum, lines).total;
  if (contrast < options.min_contrast) {
    return Unmeasurable(fmt::format(
        "the strongest wave, {:.3f} mm, has an amplitude of {:.4f} of the mean reflectance: below "
        "{} it may be the camera's grid and not lines",
        lines.pitch_mm, contrast, options.min_contrast));
  }
  return lines;
}

}  // namespace laygauge
