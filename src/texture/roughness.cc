#include "texture/roughness.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>

#include "base/error.h"
#include "base/statistics.h"

namespace laygauge {
namespace {

enum class BinKind : std::uint8_t { kOutside, kBackground, kAround, kLine };

// What a bin of the half plane belongs to, and for lines and their surroundings to which spot.
struct BinMap {
  std::vector<BinKind> kinds;  // row-major, as FieldSpectrum::power
  std::vector<int> spots;
  std::vector<float> counts;  // 2 where the bin stands for its mirror image too, else 1
  int spot_count = 0;
};

// Wave vectors of the fundamental and harmonics inside the band, both lays.
std::vector<cv::Point2d> Spots(const std::optional<Lines>& lines, double high_per_mm) {
  std::vector<cv::Point2d> spots;
  if (!lines) {
    return spots;
  }
  std::vector<cv::Point2d> waves{lines->frequency_per_mm};
  if (lines->second_lay) {
    const double lay = lines->second_lay->lay_deg * std::numbers::pi / 180;
    waves.push_back(cv::Point2d(std::sin(lay), std::cos(lay)) / lines->pitch_mm);
  }
  for (const cv::Point2d wave : waves) {
    for (double k = 1; k * cv::norm(wave) < high_per_mm; ++k) {
      spots.push_back(k * wave);
    }
  }
  return spots;
}

BinMap MapBins(const FieldSpectrum& spectrum, const std::optional<Lines>& lines,
               const RoughnessOptions& options) {
  const double low = 1 / options.max_wavelength_mm;
  const double high = 1 / options.min_wavelength_mm;
  const double inner = options.line_halfwidth_bins * spectrum.bin_per_mm;
  const double outer = inner + 1.5 * spectrum.bin_per_mm;
  const std::vector<cv::Point2d> spots = Spots(lines, high);
  const int rows = spectrum.power.rows;
  const int cols = spectrum.power.cols;
  BinMap map{std::vector<BinKind>(rows * cols, BinKind::kOutside), std::vector<int>(rows * cols, 0),
             std::vector<float>(rows * cols, 0), static_cast<int>(spots.size())};
  for (int ky = 0; ky < rows; ++ky) {
    for (int kx = 0; kx < cols; ++kx) {
      const cv::Point2d f(kx * spectrum.bin_per_mm,
                          (ky > rows / 2 ? ky - rows : ky) * spectrum.bin_per_mm);
      const double radius = cv::norm(f);
      if (radius < low || radius > high) {
        continue;
      }
      const int i = ky * cols + kx;
      map.kinds[i] = BinKind::kBackground;
      map.counts[i] = kx == 0 || kx == cols - 1 ? 1 : 2;
      for (std::size_t s = 0; s < spots.size(); ++s) {
        const double distance = std::min(cv::norm(f - spots[s]), cv::norm(f + spots[s]));
        if (distance <= inner) {
          map.kinds[i] = BinKind::kLine;
          map.spots[i] = static_cast<int>(s);
        } else if (distance <= outer && map.kinds[i] == BinKind::kBackground) {
          map.kinds[i] = BinKind::kAround;
          map.spots[i] = static_cast<int>(s);
        }
      }
    }
  }
  return map;
}

struct Parts {
  double total = 0;
  double aperiodic = 0;
};

// Variances of the band and of its aperiodic part. `power` is continuous.
Parts SplitPower(const cv::Mat& power, const BinMap& map) {
  const auto* p = power.ptr<float>();
  std::vector<std::vector<double>> around(map.spot_count);
  std::vector<double> line_bins(map.spot_count, 0);
  Parts parts;
  for (std::size_t i = 0; i < map.kinds.size(); ++i) {
    if (map.kinds[i] == BinKind::kOutside) {
      continue;
    }
    const double value = p[i] * map.counts[i];
    parts.total += value;
    if (map.kinds[i] == BinKind::kLine) {
      line_bins[map.spots[i]] += map.counts[i];
      continue;
    }
    parts.aperiodic += value;
    if (map.kinds[i] == BinKind::kAround) {
      around[map.spots[i]].push_back(p[i]);
    }
  }
  for (int s = 0; s < map.spot_count; ++s) {
    parts.aperiodic += around[s].empty() ? 0 : line_bins[s] * Median(around[s]);
  }
  parts.aperiodic = std::min(parts.aperiodic, parts.total);
  return parts;
}

Finding Measure(const Surface& surface) {
  const std::optional<Roughness> roughness =
      MeasureRoughness(surface.spectrum, surface.lines, surface.patch->noise_sd);
  const Feature no_tiles{std::nullopt, std::nullopt, surface.no_lines_reason};
  if (!roughness) {
    return {{no_tiles, no_tiles}, {}};
  }
  const Feature aperiodic{roughness->aperiodic, roughness->aperiodic_sd, ""};
  if (!surface.lines) {
    return {{aperiodic, {std::nullopt, std::nullopt, surface.no_lines_reason}}, {}};
  }
  return {{aperiodic, {roughness->line_share, roughness->line_share_sd, ""}}, {}};
}

}  // namespace

void RoughnessOptions::Check() const {
  if (!(min_wavelength_mm > 0 && min_wavelength_mm < max_wavelength_mm)) {
    throw BadOption(
        fmt::format("min_wavelength_mm is {}: it must be above 0 and below max_wavelength_mm, {}",
                    min_wavelength_mm, max_wavelength_mm));
  }
  if (!(line_halfwidth_bins >= 2)) {
    throw BadOption(
        fmt::format("line_halfwidth_bins is {}: it must be 2 at least, the Hann window's lobe",
                    line_halfwidth_bins));
  }
  if (!(share_floor > 0)) {
    throw BadOption(fmt::format("share_floor is {}: it must be above 0", share_floor));
  }
}

std::optional<Roughness> MeasureRoughness(const FieldSpectrum& spectrum,
                                          const std::optional<Lines>& lines, double noise_sd,
                                          const RoughnessOptions& options) {
  options.Check();
  if (spectrum.tiles.empty()) {
    return std::nullopt;
  }
  const BinMap map = MapBins(spectrum, lines, options);
  double bins = 0;
  for (const float count : map.counts) {
    bins += count;
  }
  const double noise =
      noise_sd * noise_sd * bins / (static_cast<double>(spectrum.side_px) * spectrum.side_px);
  std::vector<double> aperiodic;
  std::vector<double> shares;
  const double floor = options.share_floor * options.share_floor;
  double total = 0;
  for (const SpectrumTile& tile : spectrum.tiles) {
    const Parts parts = SplitPower(tile.power, map);
    total += std::max(0.0, parts.total - noise);
    aperiodic.push_back(std::max(0.0, parts.aperiodic - noise));
    const double lines_power = std::max(0.0, parts.total - std::max(parts.aperiodic, noise));
    shares.push_back(lines_power / (std::max(0.0, parts.total - noise) + floor));
  }
  const double count = static_cast<double>(spectrum.tiles.size());
  Roughness result;
  result.total = std::sqrt(total / count);
  result.aperiodic = std::sqrt(Mean(aperiodic));
  // Of a square root: half the relative deviation of the mean.
  result.aperiodic_sd = result.aperiodic > 0 ? StandardDeviation(aperiodic) / std::sqrt(count) /
                                                   (2 * result.aperiodic)
                                             : 0;
  result.line_share = std::max(0.0, total / count - Mean(aperiodic)) / (total / count + floor);
  result.line_share_sd = StandardDeviation(shares) / std::sqrt(count);
  return result;
}

Metric RoughnessMetric() {
  return {"roughness",
          3,
          {{"aperiodic_roughness",
            "root mean square of what is no line, wavelengths 0.2 to 2 mm, of mean reflectance"},
           {"line_power_share",
            "share of the power of wavelengths 0.2 to 2 mm that lies in the lines, 0 to 1"}},
          &Measure};
}

}  // namespace laygauge
