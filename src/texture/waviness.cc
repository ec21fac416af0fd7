#include "texture/waviness.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <numeric>
#include <opencv2/imgproc.hpp>

#include "base/statistics.h"
#include "base/vectorize.h"
#include "texture/form.h"

namespace laygauge {
namespace {

// The field averaged to square cells.
struct CellField {
  cv::Mat values;   // CV_32FC1: mean of the cell's field pixels; 0 where there are none
  cv::Mat weights;  // CV_32FC1: share of the cell's pixels in the field
  double cell_mm = 0;
  double width_mm = 0;  // the shorter side of the field's bounds
};

// Adds the pixels of a row that lie in the field.
LAYGAUGE_WIDE_VECTORS
void AddRow(const float* relative, const std::uint8_t* in, int columns, float* __restrict sums,
            float* __restrict counts) {
  for (int x = 0; x < columns; ++x) {
    const float value = relative[x];
    sums[x] += in[x] != 0 ? value : 0.0F;
  }
  for (int x = 0; x < columns; ++x) counts[x] += in[x] != 0 ? 1.0F : 0.0F;
}

CellField AverageCells(const Patch& patch, double cell_mm) {
  const cv::Mat field = patch.regions == static_cast<int>(Region::kField);
  const cv::Rect bounds = cv::boundingRect(field);
  const int side = std::max(1, static_cast<int>(std::lround(cell_mm * patch.px_per_mm)));
  CellField cells;
  cells.cell_mm = side / patch.px_per_mm;
  cells.width_mm = std::min(bounds.width, bounds.height) / patch.px_per_mm;
  const cv::Size size((bounds.width + side - 1) / side, (bounds.height + side - 1) / side);
  cells.values = cv::Mat::zeros(size, CV_32FC1);
  cells.weights = cv::Mat::zeros(size, CV_32FC1);
  std::vector<float> sums(size.width * side);
  std::vector<float> counts(size.width * side);
  for (int row = 0; row < size.height; ++row) {
    std::fill(sums.begin(), sums.end(), 0.0F);
    std::fill(counts.begin(), counts.end(), 0.0F);
    for (int y = row * side; y < std::min(bounds.height, (row + 1) * side); ++y) {
      const auto* in = field.ptr<std::uint8_t>(bounds.y + y) + bounds.x;
      const auto* relative = patch.relative.ptr<float>(bounds.y + y) + bounds.x;
      AddRow(relative, in, bounds.width, sums.data(), counts.data());
    }
    auto* values = cells.values.ptr<float>(row);
    auto* weights = cells.weights.ptr<float>(row);
    for (int cell = 0; cell < size.width; ++cell) {
      const auto from = static_cast<std::ptrdiff_t>(cell) * side;
      values[cell] = std::accumulate(&sums[from], &sums[from] + side, 0.0F);
      weights[cell] = std::accumulate(&counts[from], &counts[from] + side, 0.0F);
    }
  }
  for (auto v = cells.values.begin<float>(), w = cells.weights.begin<float>();
       v != cells.values.end<float>(); ++v, ++w) {
    *v = *w > 0 ? *v / *w : 0;
    *w /= static_cast<float>(side * side);
  }
  return cells;
}

// Weighted Gaussian mean with the cut-off wavelength `cutoff_mm`.
cv::Mat LowPass(const CellField& cells, double cutoff_mm) {
  // exp(-pi (r / (a c))^2) has the standard deviation a c / sqrt(2 pi) = c sqrt(ln 2 / 2) / pi; the
  // cells' averaging has contributed cell^2 / 12 to its square.
  const double sd_mm = cutoff_mm * std::sqrt(std::numbers::ln2 / 2) / std::numbers::pi;
  const double cell_sd = cells.cell_mm / std::sqrt(12.0);
  const double sd_cells = std::sqrt(sd_mm * sd_mm - cell_sd * cell_sd) / cells.cell_mm;
  const int size = 2 * static_cast<int>(std::ceil(3.5 * sd_cells)) + 1;
  const cv::Mat weighted = cells.values.mul(cells.weights);
  cv::Mat sum;
  cv::Mat weights;
  cv::GaussianBlur(weighted, sum, {size, size}, sd_cells, sd_cells, cv::BORDER_CONSTANT);
  cv::GaussianBlur(cells.weights, weights, {size, size}, sd_cells, sd_cells, cv::BORDER_CONSTANT);
  cv::max(weights, 1e-6, weights);
  return sum / weights;
}

Finding Measure(const Surface& surface) {
  const Expected<Waviness> waviness = MeasureWaviness(*surface.patch);
  if (!waviness) {
    return {{{std::nullopt, std::nullopt, waviness.error().message}}, {}};
  }
  return {{{waviness->rms, waviness->sd, ""}}, {}};
}

}  // namespace

void WavinessOptions::Check() const {
  if (!(min_wavelength_mm > 0 && min_wavelength_mm < max_wavelength_mm)) {
    throw BadOption(
        fmt::format("min_wavelength_mm is {}: it must be above 0 and below max_wavelength_mm, {}",
                    min_wavelength_mm, max_wavelength_mm));
  }
  if (!(cell_mm > 0 && cell_mm <= 0.25 * min_wavelength_mm)) {
    throw BadOption(fmt::format("cell_mm is {}: it must be above 0, at most a quarter of {} mm",
                                cell_mm, min_wavelength_mm));
  }
  if (!(floor > 0)) {
    throw BadOption(fmt::format("floor is {}: it must be above 0", floor));
  }
}

Expected<Waviness> MeasureWaviness(const Patch& patch, const WavinessOptions& options) {
  options.Check();
  CellField cells = AverageCells(patch, options.cell_mm);
  if (cells.width_mm < options.max_wavelength_mm) {
    return Unmeasurable(fmt::format("the field is {:.1f} mm wide: waviness needs {} mm",
                                    cells.width_mm, options.max_wavelength_mm));
  }
  RemoveForm(cells.values, cells.weights);
  const cv::Mat band =
      LowPass(cells, options.min_wavelength_mm) - LowPass(cells, options.max_wavelength_mm);
  constexpr int kParts = 3;
  std::vector<double> sums(kParts * kParts, 0);
  std::vector<double> weights(kParts * kParts, 0);
  for (int y = 0; y < band.rows; ++y) {
    for (int x = 0; x < band.cols; ++x) {
      const int part = kParts * y / band.rows * kParts + kParts * x / band.cols;
      const double weight = cells.weights.at<float>(y, x);
      sums[part] += weight * band.at<float>(y, x) * band.at<float>(y, x);
      weights[part] += weight;
    }
  }
  std::vector<double> variances;
  double sum = 0;
  double weight = 0;
  for (int part = 0; part < kParts * kParts; ++part) {
    sum += sums[part];
    weight += weights[part];
    if (weights[part] > 0) {
      variances.push_back(sums[part] / weights[part]);
    }
  }
  const double variance = sum / weight;
  const double noise = options.floor * options.floor;
  const double rms = std::sqrt(variance) * variance / (variance + noise);
  const double sd_of_variance =
      StandardDeviation(variances) / std::sqrt(static_cast<double>(variances.size()));
  // The derivative of v^1.5 / (v + n) by v.
  const double slope =
      std::sqrt(variance) * (0.5 * variance + 1.5 * noise) / std::pow(variance + noise, 2);
  return Waviness{rms, slope * sd_of_variance};
}

Metric WavinessMetric() {
  return {"waviness",
          2,
          {{"waviness", "root mean square of waves of 2 to 10 mm, of mean reflectance"}},
          &Measure};
}

}  // namespace laygauge
