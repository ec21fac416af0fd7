#include "coupon/photo_noise.h"

#include <fmt/format.h>

#include <Eigen/Dense>
#include <algorithm>
#include <cmath>
#include <optional>
#include <vector>

#include "base/statistics.h"
#include "coupon/equalizing_kernel.h"

namespace laygauge {

double PhotoNoise::RelativeSd(double linear_light) const {
  return std::sqrt(variance_in_dark + variance_by_light * linear_light) / linear_light;
}

namespace {

struct FlatArea {
  double x_mm = 0;
  double y_mm = 0;
  double half_mm = 0;  // of the square that is read
};

struct FlatReading {
  double light = 0;
  double variance = 0;
};

std::vector<FlatArea> FlatAreas(const SheetDescription& sheet) {
  constexpr double kClear = 0.8;  // mm, to the nearest edge: the filter's reach and some
  std::vector<FlatArea> areas;
  for (const SharpnessSquare& square : sheet.sharpness_squares) {
    areas.push_back({square.x_mm, square.y_mm, 0.45 * square.side_mm - kClear});
    // Beside it: a tilted square reaches 0.6 sides far.
    const double beside = 0.6 * square.side_mm + kClear + 1.5;
    areas.push_back({square.x_mm - beside, square.y_mm, 1.5});
    areas.push_back({square.x_mm + beside, square.y_mm, 1.5});
  }
  for (const GrayPatch& gray : sheet.grays) {
    areas.push_back({gray.x_mm, gray.y_mm, gray.side_mm / 2 - kClear});
  }
  return areas;
}

// Mean, and variance about the best plane, of the middle of a filtered area.
FlatReading Describe(const cv::Mat& filtered) {
  Eigen::Matrix3d normal = Eigen::Matrix3d::Zero();
  Eigen::Vector3d right = Eigen::Vector3d::Zero();
  double squares = 0;
  for (int row = 0; row < filtered.rows; ++row) {
    const auto* values = filtered.ptr<float>(row);
    for (int column = 0; column < filtered.cols; ++column) {
      const Eigen::Vector3d basis(1, column - filtered.cols / 2.0, row - filtered.rows / 2.0);
      normal += basis * basis.transpose();
      right += values[column] * basis;
      squares += values[column] * values[column];
    }
  }
  const Eigen::Vector3d plane = normal.ldlt().solve(right);
  const double n = normal(0, 0);
  return {right[0] / n, std::max(0.0, squares - plane.dot(right)) / (n - 3)};
}

std::optional<FlatReading> ReadFlat(const Photo& photo, const View& view, const FlatArea& area,
                                    const SeparableFilter& filter, double px_per_mm) {
  const Eigen::Vector2d center = view.PixelFromSheet(area.x_mm, area.y_mm, 0);
  const int half = static_cast<int>(area.half_mm * px_per_mm);
  if (half < 4) return std::nullopt;
  int reach = 0;
  for (const auto& term : filter.terms) reach = std::max(reach, term.row.rows / 2);
  const int outer = half + reach;
  const cv::Rect box(static_cast<int>(std::lround(center.x())) - outer,
                     static_cast<int>(std::lround(center.y())) - outer, 2 * outer + 1,
                     2 * outer + 1);
  if ((box & cv::Rect({}, photo.size())) != box) return std::nullopt;
  const cv::Mat filtered = filter.Apply(LinearRegion(photo, box));
  return Describe(filtered(cv::Rect(reach, reach, 2 * half + 1, 2 * half + 1)));
}

// Least squares of variance = dark + light * slope, neither below 0, each reading weighted by its
// relative precision: all have the same, so by 1 / variance^2 of a first guess.
PhotoNoise FitNoise(const std::vector<FlatReading>& readings) {
  double w = 0, wl = 0, wll = 0, wv = 0, wlv = 0;
  for (const FlatReading& reading : readings) {
    const double weight = 1 / std::pow(reading.variance, 2);
    w += weight;
    wl += weight * reading.light;
    wll += weight * reading.light * reading.light;
    wv += weight * reading.variance;
    wlv += weight * reading.light * reading.variance;
  }
  const double determinant = w * wll - wl * wl;
  if (determinant > 1e-9 * w * wll) {
    const double dark = (wll * wv - wl * wlv) / determinant;
    const double by_light = (w * wlv - wl * wv) / determinant;
    if (dark >= 0 && by_light >= 0) return {dark, by_light};
    if (dark < 0) return {0, wlv / wll};
  }
  return {wv / w, 0};
}

}  // namespace

Expected<PhotoNoise> MeasureNoise(const Photo& photo, const View& view,
                                  const SheetDescription& sheet, const SheetSharpness& sharpness,
                                  double working_sd_mm, double max_gain) {
  // One filter for all: the spread at the sheet's middle.
  const LocalSpread spread = sharpness.At(sheet.page_width_mm / 2, sheet.page_height_mm / 2, 0);
  const SeparableFilter filter = DesignEqualizer(spread, spread.px_per_mm, working_sd_mm, max_gain);
  std::vector<FlatReading> readings;
  std::vector<double> relative;
  for (const FlatArea& area : FlatAreas(sheet)) {
    const auto reading = ReadFlat(photo, view, area, filter, spread.px_per_mm);
    // A clipped area has no noise to show.
    if (!reading || reading->variance <= 0 || reading->light > 0.98) continue;
    readings.push_back(*reading);
    relative.push_back(reading->variance / reading->light);
  }
  if (readings.empty()) {
    return Unmeasurable(fmt::format(
        "{}: no flat area of the sheet can be read, so the photo's noise is unknown: keep the "
        "sharpness squares and the grays clean and in the picture.",
        photo.file));
  }
  // Dirt and print edges make an area vary far more than its peers under the same light.
  constexpr double kOutlier = 4;
  const double typical = Median(relative);
  std::erase_if(readings, [&](const FlatReading& reading) {
    return reading.light > 0.1 && reading.variance / reading.light > kOutlier * typical;
  });
  return FitNoise(readings);
}

}  // namespace laygauge
