#include "texture/field_spectrum.h"

#include <fmt/format.h>

#include <array>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <utility>

#include "base/error.h"
#include "base/vectorize.h"

namespace laygauge {
namespace {

// Periodic Hann window, Harris 1978 eq. 27.
std::vector<float> HannWindow(int length) {
  std::vector<float> window(length);
  for (int i = 0; i < length; ++i) {
    window[i] = static_cast<float>(0.5 - 0.5 * std::cos(2 * std::numbers::pi * i / length));
  }
  return window;
}

// First pixels of tiles that cover [begin, end) evenly.
std::vector<int> TileStarts(int begin, int end, int side, double max_overlap) {
  const int room = end - begin - side;
  if (room < 0) {
    return {};
  }
  const int steps = static_cast<int>(std::ceil(room / (side * (1 - max_overlap))));
  std::vector<int> starts;
  for (int i = 0; i <= steps; ++i) {
    starts.push_back(begin + (steps == 0 ? room / 2 : room * i / steps));
  }
  return starts;
}

struct WindowedTile {
  cv::Mat values;  // window times mask times (reflectance less its weighted mean)
  double share = 0;
  double weight_sum = 0;
  double weight_squares = 0;
};

WindowedTile WindowTile(const Patch& patch, cv::Rect rect, const cv::Mat& window) {
  WindowedTile tile{cv::Mat(rect.height, rect.width, CV_32FC1), 0, 0, 0};
  cv::Mat weights(rect.height, rect.width, CV_32FC1);
  double sum = 0;
  double sum_weights = 0;
  double sum_window = 0;
  for (int y = 0; y < rect.height; ++y) {
    const auto* relative = patch.relative.ptr<float>(rect.y + y) + rect.x;
    const auto* region = patch.regions.ptr<std::uint8_t>(rect.y + y) + rect.x;
    const auto* w = window.ptr<float>(y);
    auto* weight = weights.ptr<float>(y);
    float row_sum = 0;
    float row_weights = 0;
    float row_squares = 0;
    float row_window = 0;
    for (int x = 0; x < rect.width; ++x) {
      const bool inside = region[x] == static_cast<std::uint8_t>(Region::kField);
      weight[x] = inside ? w[x] : 0.0F;
      row_sum += inside ? w[x] * relative[x] : 0.0F;
      row_weights += weight[x];
      row_squares += weight[x] * weight[x];
      row_window += w[x];
    }
    sum += row_sum;
    sum_weights += row_weights;
    sum_window += row_window;
    tile.weight_squares += row_squares;
  }
  tile.share = sum_weights / sum_window;
  tile.weight_sum = sum_weights;
  const auto mean = static_cast<float>(sum_weights > 0 ? sum / sum_weights : 0);
  for (int y = 0; y < rect.height; ++y) {
    const auto* relative = patch.relative.ptr<float>(rect.y + y) + rect.x;
    const auto* weight = weights.ptr<float>(y);
    auto* value = tile.values.ptr<float>(y);
    for (int x = 0; x < rect.width; ++x) {
      value[x] = weight[x] > 0 ? weight[x] * (relative[x] - mean) : 0.0F;
    }
  }
  return tile;
}

// Squared magnitudes, times `scale`, of the left half plane of a real image's spectrum, side x
// side, `side` even, in OpenCV's packed form: real and imaginary parts side by side, but for the
// first and last column, which stand one below the other and hold half of their symmetric column.
cv::Mat HalfPower(const cv::Mat& packed, double scale) {
  const int side = packed.rows;
  const auto factor = static_cast<float>(scale);
  const auto square = [factor](float re, float im) { return factor * (re * re + im * im); };
  cv::Mat power(side, side / 2 + 1, CV_32FC1);
  for (int y = 0; y < side; ++y) {
    const auto* in = packed.ptr<float>(y);
    auto* out = power.ptr<float>(y);
    for (int x = 1; x < side / 2; ++x) out[x] = square(in[2 * x - 1], in[2 * x]);
  }
  for (const auto& [from, to] : {std::pair{0, 0}, std::pair{side - 1, side / 2}}) {
    power.at<float>(0, to) = square(packed.at<float>(0, from), 0);
    power.at<float>(side / 2, to) = square(packed.at<float>(side - 1, from), 0);
    for (int y = 1; y < side / 2; ++y) {
      power.at<float>(y, to) =
          square(packed.at<float>(2 * y - 1, from), packed.at<float>(2 * y, from));
      power.at<float>(side - y, to) = power.at<float>(y, to);
    }
  }
  return power;
}

// A wave along x: its cosine and sine at a tile's columns.
struct RowWave {
  std::vector<float> cosine;
  std::vector<float> sine;
};

// Sums of two neighbouring rows times the wave: cosine and sine of the first, then of the second.
LAYGAUGE_WIDE_VECTORS
std::array<float, 4> CorrelateRows(const float* row, int side, const RowWave& wave) {
  constexpr int kWide = 8;
  const float* next = row + side;
  const float* cosine = wave.cosine.data();
  const float* sine = wave.sine.data();
  EightFloats sums[4] = {};
  int x = 0;
  for (; x + kWide <= side; x += kWide) {
    sums[0] += *EightAt(row + x) * *EightAt(cosine + x);
    sums[1] += *EightAt(row + x) * *EightAt(sine + x);
    sums[2] += *EightAt(next + x) * *EightAt(cosine + x);
    sums[3] += *EightAt(next + x) * *EightAt(sine + x);
  }
  std::array<float, 4> totals{};
  for (size_t k = 0; k < 4; ++k) {
    for (int i = 0; i < kWide; ++i) totals[k] += sums[k][i];
  }
  for (; x < side; ++x) {
    totals[0] += row[x] * cosine[x];
    totals[1] += row[x] * sine[x];
    totals[2] += next[x] * cosine[x];
    totals[3] += next[x] * sine[x];
  }
  return totals;
}

}  // namespace

void FieldSpectrumOptions::Check() const {
  if (!(tile_mm > 0)) {
    throw BadOption(fmt::format("tile_mm is {}: it must be above 0", tile_mm));
  }
  if (!(max_overlap >= 0 && max_overlap <= 0.75)) {
    throw BadOption(fmt::format("max_overlap is {}: it must be within 0..0.75", max_overlap));
  }
  if (!(min_field_share > 0 && min_field_share <= 1)) {
    throw BadOption(
        fmt::format("min_field_share is {}: it must be above 0, at most 1", min_field_share));
  }
}

FieldSpectrum MeasureFieldSpectrum(const Patch& patch, const FieldSpectrumOptions& options) {
  options.Check();
  const int side = 2 * cv::getOptimalDFTSize(
                           static_cast<int>(std::lround(options.tile_mm * patch.px_per_mm)) / 2);
  FieldSpectrum result{side,
                       patch.px_per_mm,
                       patch.px_per_mm / side,
                       {},
                       cv::Mat::zeros(side, side / 2 + 1, CV_32FC1)};
  const cv::Rect bounds = cv::boundingRect(patch.regions == static_cast<int>(Region::kField));
  const cv::Mat hann(HannWindow(side), true);
  const cv::Mat window = hann * hann.t();
  cv::Mat spectrum;
  for (const int y : TileStarts(bounds.y, bounds.br().y, side, options.max_overlap)) {
    for (const int x : TileStarts(bounds.x, bounds.br().x, side, options.max_overlap)) {
      const WindowedTile tile = WindowTile(patch, {x, y, side, side}, window);
      if (tile.share < options.min_field_share) {
        continue;
      }
      cv::dft(tile.values, spectrum);
      // Parseval: the plane's sum of |X|^2 is side^2 times the sum of squared weighted values.
      const double scale = 1.0 / (static_cast<double>(side) * side * tile.weight_squares);
      const cv::Point2d centre(x + (side - 1) / 2.0, y + (side - 1) / 2.0);
      result.tiles.push_back({{x, y},
                              patch.CouponFromPixel(centre),
                              tile.values,
                              tile.weight_sum,
                              HalfPower(spectrum, scale)});
      result.power += result.tiles.back().power;
    }
  }
  if (!result.tiles.empty()) {
    result.power /= static_cast<double>(result.tiles.size());
  }
  return result;
}

std::vector<std::vector<std::complex<double>>> DemodulateTiles(
    const FieldSpectrum& spectrum, const std::vector<cv::Point2d>& frequencies_per_mm) {
  using Complex = std::complex<double>;
  const int side = spectrum.side_px;
  const double centre = (side - 1) / 2.0;
  const size_t count = frequencies_per_mm.size();
  std::vector<RowWave> along_x(count);
  std::vector<std::vector<Complex>> along_y(count);
  for (size_t k = 0; k < count; ++k) {
    const cv::Point2d cycles = frequencies_per_mm[k] / spectrum.px_per_mm;
    for (int i = 0; i < side; ++i) {
      const double turn = 2 * std::numbers::pi * (i - centre);
      along_x[k].cosine.push_back(static_cast<float>(std::cos(turn * cycles.x)));
      along_x[k].sine.push_back(static_cast<float>(std::sin(turn * cycles.x)));
      along_y[k].push_back(std::polar(1.0, -turn * cycles.y));
    }
  }
  std::vector<std::vector<Complex>> amplitudes;
  for (const SpectrumTile& tile : spectrum.tiles) {
    auto& sums = amplitudes.emplace_back(count);
    for (int y = 0; y < side; y += 2) {
      for (size_t k = 0; k < count; ++k) {
        const auto [c0, s0, c1, s1] = CorrelateRows(tile.values.ptr<float>(y), side, along_x[k]);
        const auto at = static_cast<size_t>(y);
        sums[k] += along_y[k][at] * Complex(c0, -s0) + along_y[k][at + 1] * Complex(c1, -s1);
      }
    }
    for (size_t k = 0; k < count; ++k) {
      const double turn = 2 * std::numbers::pi * frequencies_per_mm[k].dot(tile.centre_mm);
      sums[k] *= 2 / tile.weight_sum * std::polar(1.0, -turn);
    }
  }
  return amplitudes;
}

std::vector<std::vector<std::complex<double>>> DemodulateTiles(const FieldSpectrum& spectrum,
                                                               cv::Point2d frequency_per_mm,
                                                               int harmonics) {
  std::vector<cv::Point2d> frequencies;
  for (int k = 1; k <= harmonics; ++k) frequencies.push_back(k * frequency_per_mm);
  return DemodulateTiles(spectrum, frequencies);
}

}  // namespace laygauge
