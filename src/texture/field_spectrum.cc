#include "texture/field_spectrum.h"

#include <fmt/format.h>

#include <array>
#include <cmath>
#include <numbers>
#include <numeric>
#include <opencv2/imgproc.hpp>
#include <utility>

#include "base/error.h"
#include "base/vectorize.h"
#include "texture/bin_weights.h"
#include "texture/tile_transform.h"

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
  double weight_sum = 0;
  double weight_squares = 0;
};

// Sums of columns, of one tile.
struct ColumnSums {
  explicit ColumnSums(int side) : values(side), weights(side), squares(side) {}
  std::vector<float> values;
  std::vector<float> weights;
  std::vector<float> squares;
};

double Sum(const std::vector<float>& values) {
  return std::accumulate(values.begin(), values.end(), 0.0);
}

// A row of window times mask, and its sums. (In one loop, compilers would branch at every pixel.)
LAYGAUGE_WIDE_VECTORS
void WeighRow(const float* relative, const std::uint8_t* region, const float* window, int side,
              float* __restrict weights, ColumnSums& sums) {
  for (int x = 0; x < side; ++x) {
    weights[x] = region[x] == static_cast<std::uint8_t>(Region::kField) ? window[x] : 0.0F;
  }
  float* __restrict of_values = sums.values.data();
  float* __restrict of_weights = sums.weights.data();
  float* __restrict of_squares = sums.squares.data();
  for (int x = 0; x < side; ++x) {
    of_values[x] += weights[x] * (weights[x] > 0 ? relative[x] : 0.0F);
    of_weights[x] += weights[x];
    of_squares[x] += weights[x] * weights[x];
  }
}

// `values` holds the weights and gets them times the relative reflectance less its mean.
LAYGAUGE_WIDE_VECTORS
void CentreRow(const float* relative, float mean, int side, float* values) {
  for (int x = 0; x < side; ++x) {
    values[x] *= (values[x] > 0 ? relative[x] : mean) - mean;
  }
}

WindowedTile WindowTile(const Patch& patch, cv::Rect rect, const cv::Mat& window) {
  WindowedTile tile{cv::Mat(rect.size(), CV_32FC1)};
  ColumnSums sums(rect.width);
  for (int y = 0; y < rect.height; ++y) {
    WeighRow(patch.relative.ptr<float>(rect.y + y) + rect.x,
             patch.regions.ptr<std::uint8_t>(rect.y + y) + rect.x, window.ptr<float>(y), rect.width,
             tile.values.ptr<float>(y), sums);
  }
  tile.weight_sum = Sum(sums.weights);
  tile.weight_squares = Sum(sums.squares);
  const double mean = tile.weight_sum > 0 ? Sum(sums.values) / tile.weight_sum : 0;
  for (int y = 0; y < rect.height; ++y) {
    CentreRow(patch.relative.ptr<float>(rect.y + y) + rect.x, static_cast<float>(mean), rect.width,
              tile.values.ptr<float>(y));
  }
  return tile;
}

// Squared magnitudes times `factor`, of pairs of real and imaginary parts.
LAYGAUGE_WIDE_VECTORS
void SquareRow(const float* pairs, float factor, int count, float* __restrict squares) {
  for (int x = 0; x < count; ++x) {
    squares[x] = factor * (pairs[2 * x] * pairs[2 * x] + pairs[2 * x + 1] * pairs[2 * x + 1]);
  }
}

// Squared magnitudes times `scale`.
cv::Mat Power(const cv::Mat& transform, double scale) {
  const auto factor = static_cast<float>(scale);
  cv::Mat power(transform.size(), CV_32FC1);
  for (int y = 0; y < power.rows; ++y) {
    SquareRow(transform.ptr<float>(y), factor, power.cols, power.ptr<float>(y));
  }
  return power;
}

// The bins about a frequency and where they are found: those beyond the half plane are conjugates.
class BinsAbout {
 public:
  BinsAbout(cv::Point2d frequency_bins, int side)
      : side_(side), x_(WeighBins(frequency_bins.x)), y_(WeighBins(frequency_bins.y)) {
    for (std::size_t i = 0; i < BinWeights::kBins; ++i) {
      const int kx = Wrapped(x_.first + static_cast<int>(i));
      mirrored_[i] = kx > side / 2;
      column_[i] = mirrored_[i] ? side - kx : kx;
      sign_[i] = mirrored_[i] ? -1.0F : 1.0F;
    }
  }

  [[nodiscard]] std::complex<double> Sum(const cv::Mat& transform) const {
    std::complex<double> sum = 0;
    for (std::size_t j = 0; j < BinWeights::kBins; ++j) {
      const int ky = Wrapped(y_.first + static_cast<int>(j));
      const auto* row = transform.ptr<cv::Vec2f>(ky);
      const auto* mirror = transform.ptr<cv::Vec2f>(Wrapped(-ky));
      float re = 0;
      float im = 0;
      for (std::size_t i = 0; i < BinWeights::kBins; ++i) {
        const cv::Vec2f& bin = (mirrored_[i] ? mirror : row)[column_[i]];
        re += x_.weights[i] * bin[0];
        im += sign_[i] * x_.weights[i] * bin[1];
      }
      sum += std::complex<double>(y_.weights[j] * re, y_.weights[j] * im);
    }
    return sum;
  }

 private:
  [[nodiscard]] int Wrapped(int k) const { return (k % side_ + side_) % side_; }

  int side_;
  BinWeights x_;
  BinWeights y_;
  std::array<bool, BinWeights::kBins> mirrored_{};
  std::array<int, BinWeights::kBins> column_{};
  std::array<float, BinWeights::kBins> sign_{};
};

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
  const double whole = cv::sum(window)[0];
  TileTransform transform(side);
  for (const int y : TileStarts(bounds.y, bounds.br().y, side, options.max_overlap)) {
    for (const int x : TileStarts(bounds.x, bounds.br().x, side, options.max_overlap)) {
      const WindowedTile windowed = WindowTile(patch, {x, y, side, side}, window);
      if (windowed.weight_sum < options.min_field_share * whole) {
        continue;
      }
      const cv::Point2d centre(x + (side - 1) / 2.0, y + (side - 1) / 2.0);
      SpectrumTile tile{{x, y}, patch.CouponFromPixel(centre), windowed.weight_sum, {}, {}};
      transform.Apply(windowed.values, tile.transform);
      // Parseval: the plane's sum of |X|^2 is side^2 times the sum of squared weighted values.
      const double scale = 1.0 / (static_cast<double>(side) * side * windowed.weight_squares);
      tile.power = Power(tile.transform, scale);
      result.power += tile.power;
      result.tiles.push_back(std::move(tile));
    }
  }
  if (!result.tiles.empty()) {
    result.power /= static_cast<double>(result.tiles.size());
  }
  return result;
}

std::vector<std::vector<std::complex<double>>> DemodulateTiles(
    const FieldSpectrum& spectrum, const std::vector<cv::Point2d>& frequencies_per_mm) {
  std::vector<BinsAbout> bins;
  for (const cv::Point2d& f : frequencies_per_mm) {
    bins.emplace_back(f / spectrum.bin_per_mm, spectrum.side_px);
  }
  // Where a tile's phases count from: half a pixel beyond its centre.
  const cv::Point2d half_pixel = cv::Point2d(0.5, 0.5) / spectrum.px_per_mm;
  std::vector<std::vector<std::complex<double>>> amplitudes;
  for (const SpectrumTile& tile : spectrum.tiles) {
    auto& sums = amplitudes.emplace_back();
    for (std::size_t k = 0; k < bins.size(); ++k) {
      const double turn =
          2 * std::numbers::pi * frequencies_per_mm[k].dot(tile.centre_mm + half_pixel);
      sums.push_back(bins[k].Sum(tile.transform) * std::polar(2 / tile.weight_sum, -turn));
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
