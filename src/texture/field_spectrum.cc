#include "texture/field_spectrum.h"

#include <fmt/format.h>

#include <Eigen/Core>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>

#include "base/error.h"

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

// Squared magnitudes of the left half plane of `spectrum` (CV_32FC2) times `scale`.
cv::Mat HalfPower(const cv::Mat& spectrum, double scale) {
  cv::Mat power(spectrum.rows, spectrum.cols / 2 + 1, CV_32FC1);
  for (int y = 0; y < power.rows; ++y) {
    const auto* in = spectrum.ptr<cv::Vec2f>(y);
    auto* out = power.ptr<float>(y);
    for (int x = 0; x < power.cols; ++x) {
      out[x] = static_cast<float>(scale) * (in[x][0] * in[x][0] + in[x][1] * in[x][1]);
    }
  }
  return power;
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
      cv::dft(tile.values, spectrum, cv::DFT_COMPLEX_OUTPUT);
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

std::vector<std::vector<std::complex<double>>> DemodulateTiles(const FieldSpectrum& spectrum,
                                                               cv::Point2d frequency_per_mm,
                                                               int harmonics) {
  using RowMajor = Eigen::Matrix<float, Eigen::Dynamic, Eigen::Dynamic, Eigen::RowMajor>;
  const int side = spectrum.side_px;
  const double centre = (side - 1) / 2.0;
  // Columns 2h and 2h + 1: cosine and sine of harmonic h + 1 along x; the same along y.
  Eigen::MatrixXf along_x(side, 2 * harmonics);
  Eigen::MatrixXcd along_y(side, harmonics);
  for (int h = 0; h < harmonics; ++h) {
    const cv::Point2d cycles = (h + 1.0) / spectrum.px_per_mm * frequency_per_mm;
    for (int i = 0; i < side; ++i) {
      const double turn = 2 * std::numbers::pi * (i - centre);
      along_x(i, 2 * h) = static_cast<float>(std::cos(turn * cycles.x));
      along_x(i, 2 * h + 1) = static_cast<float>(std::sin(turn * cycles.x));
      along_y(i, h) = std::polar(1.0, -turn * cycles.y);
    }
  }
  std::vector<std::vector<std::complex<double>>> amplitudes;
  for (const SpectrumTile& tile : spectrum.tiles) {
    const Eigen::Map<const RowMajor> values(tile.values.ptr<float>(), side, side);
    // Column by column: the packing that pays for large products takes longer than these do.
    Eigen::MatrixXd rows(side, along_x.cols());
    for (Eigen::Index c = 0; c < along_x.cols(); ++c) {
      rows.col(c) = (values * along_x.col(c)).cast<double>();
    }
    auto& of_tile = amplitudes.emplace_back(harmonics);
    for (int h = 0; h < harmonics; ++h) {
      const std::complex<double> i(0, 1);
      const Eigen::VectorXcd row = rows.col(2 * h) - i * rows.col(2 * h + 1);
      const double turn = 2 * std::numbers::pi * (h + 1) * frequency_per_mm.dot(tile.centre_mm);
      of_tile[h] = 2 / tile.weight_sum * std::polar(1.0, -turn) *
                   (along_y.col(h).array() * row.array()).sum();
    }
  }
  return amplitudes;
}

}  // namespace laygauge
