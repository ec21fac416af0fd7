#include "texture/gradient_energy.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <opencv2/imgproc.hpp>

#include "base/error.h"
#include "base/statistics.h"

namespace laygauge {
namespace {

// Structure tensor of one cell: means of products of derivatives, per mm^2.
struct Tensor {
  double xx = 0;
  double yy = 0;
  double xy = 0;

  // Doubled angle and coherence of the gradient as one complex number.
  [[nodiscard]] std::complex<double> Directed(double floor) const {
    const double energy = xx + yy + floor;
    return energy > 0 ? std::complex<double>(xx - yy, 2 * xy) / energy : 0;
  }
};

// Sums of products of Sobel derivatives over `width` pixels of one row.
void AddRow(const float* above, const float* here, const float* below, int width, float* sums) {
  float xx = 0;
  float yy = 0;
  float xy = 0;
  for (int x = 0; x < width; ++x) {
    const float dx = (above[x + 1] - above[x - 1]) + 2 * (here[x + 1] - here[x - 1]) +
                     (below[x + 1] - below[x - 1]);
    const float dy =
        (below[x - 1] + 2 * below[x] + below[x + 1]) - (above[x - 1] + 2 * above[x] + above[x + 1]);
    xx += dx * dx;
    yy += dy * dy;
    xy += dx * dy;
  }
  sums[0] += xx;
  sums[1] += yy;
  sums[2] += xy;
}

bool WhollyInside(const cv::Mat& mask, cv::Rect rect) {
  for (int y = rect.y; y < rect.br().y; ++y) {
    const auto* row = mask.ptr<std::uint8_t>(y) + rect.x;
    if (std::find(row, row + rect.width, 0) != row + rect.width) {
      return false;
    }
  }
  return true;
}

std::vector<Tensor> CellTensors(const cv::Mat& image, const cv::Mat& mask, int side,
                                double px_per_mm) {
  std::vector<Tensor> cells;
  const double scale = px_per_mm * px_per_mm / (64.0 * side * side);
  for (int y = 1; y + side < image.rows; y += side) {
    for (int x = 1; x + side < image.cols; x += side) {
      if (!WhollyInside(mask, {x - 1, y - 1, side + 2, side + 2})) {
        continue;
      }
      float sums[3] = {0, 0, 0};
      for (int row = y; row < y + side; ++row) {
        AddRow(image.ptr<float>(row - 1) + x, image.ptr<float>(row) + x,
               image.ptr<float>(row + 1) + x, side, sums);
      }
      cells.push_back({scale * sums[0], scale * sums[1], scale * sums[2]});
    }
  }
  return cells;
}

double StandardError(const std::vector<double>& values) {
  return StandardDeviation(values) / std::sqrt(static_cast<double>(values.size()));
}

// Circular standard deviation of axes from the resultant length of doubled angles, degrees.
double SpreadOf(double resultant) {
  const double r = std::clamp(resultant, 1e-12, 1.0);
  return 0.5 * std::sqrt(-2 * std::log(r)) * 180 / std::numbers::pi;
}

Finding Measure(const Surface& surface) {
  const AlignedField& field = surface.aligned_half;
  std::optional<GradientEnergy> energy;
  if (!field.relative.empty()) {
    const cv::Mat mask = field.regions == static_cast<int>(Region::kField);
    energy = MeasureGradientEnergy(field.relative, mask, field.px_per_mm);
  }
  if (!energy) {
    const Feature none{std::nullopt, std::nullopt, "the field holds no whole cell of 1.2 mm"};
    return {std::vector<Feature>(4, none), {}};
  }
  // Without lines the cells' directions are those of noise.
  const Feature spread =
      surface.lines ? Feature{energy->orientation_spread_deg, energy->orientation_spread_sd_deg, ""}
                    : Feature{std::nullopt, std::nullopt, surface.no_lines_reason};
  return {{{energy->along, energy->along_sd, ""},
           {energy->across, energy->across_sd, ""},
           {energy->coherence, energy->coherence_sd, ""},
           spread},
          {}};
}

}  // namespace

void GradientEnergyOptions::Check() const {
  if (!(cell_mm > 0)) {
    throw BadOption(fmt::format("cell_mm is {}: it must be above 0", cell_mm));
  }
  if (!(floor_per_mm2 >= 0)) {
    throw BadOption(fmt::format("floor_per_mm2 is {}: it must be 0 at least", floor_per_mm2));
  }
}

std::optional<GradientEnergy> MeasureGradientEnergy(const cv::Mat& image, const cv::Mat& mask,
                                                    double px_per_mm,
                                                    const GradientEnergyOptions& options) {
  options.Check();
  const int side = std::max(2, static_cast<int>(std::lround(options.cell_mm * px_per_mm)));
  const std::vector<Tensor> cells = CellTensors(image, mask, side, px_per_mm);
  if (cells.empty()) {
    return std::nullopt;
  }
  std::vector<double> xx;
  std::vector<double> yy;
  std::vector<double> coherences;
  std::complex<double> sum = 0;
  std::complex<double> weighted = 0;  // by the cells' squared coherence
  double weights = 0;
  for (const Tensor& cell : cells) {
    xx.push_back(cell.xx);
    yy.push_back(cell.yy);
    const std::complex<double> directed = cell.Directed(options.floor_per_mm2);
    coherences.push_back(std::abs(directed));
    sum += directed;
    weighted += directed * coherences.back();
    weights += coherences.back() * coherences.back();
  }
  GradientEnergy result;
  result.along = Mean(xx);
  result.across = Mean(yy);
  result.along_sd = StandardError(xx);
  result.across_sd = StandardError(yy);
  result.coherence = std::abs(sum) / static_cast<double>(cells.size());
  result.coherence_sd = StandardError(coherences);
  result.orientation_deg = 0.5 * std::arg(sum) * 180 / std::numbers::pi;
  result.orientation_spread_deg = weights > 0 ? SpreadOf(std::abs(weighted) / weights) : 0;
  // Of a deviation, for normal data: over sqrt(2 n).
  result.orientation_spread_sd_deg =
      result.orientation_spread_deg / std::sqrt(2.0 * static_cast<double>(cells.size()));
  return result;
}

Metric GradientEnergyMetric() {
  return {"gradient_energy",
          3,
          {{"gradient_energy_along_per_mm2", "mean squared slope of reflectance along the lay"},
           {"gradient_energy_across_per_mm2", "mean squared slope of reflectance across the lay"},
           {"gradient_coherence", "how far the slopes of all parts share one direction, 0 to 1"},
           {"orientation_spread_deg", "deviation of the local direction of the texture"}},
          &Measure};
}

}  // namespace laygauge
