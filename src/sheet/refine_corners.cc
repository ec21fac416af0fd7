#include "sheet/refine_corners.h"

#include <fmt/format.h>

#include <Eigen/Dense>
#include <algorithm>
#include <cmath>
#include <limits>
#include <vector>

#include "base/error.h"
#include "base/statistics.h"

namespace laygauge {
namespace {

using Eigen::Vector2d;

struct Line {
  Vector2d point;
  Vector2d direction;
  double scatter_px = 0;
};

// A side as walked with the square to the right on the page (y down): `outward` points to paper.
struct Side {
  Vector2d from;
  Vector2d along;    // unit
  Vector2d outward;  // unit
  double length_px = 0;

  Side(const Vector2d& begin, const Vector2d& end, const Vector2d& centre)
      : from(begin), along((end - begin).normalized()), length_px((end - begin).norm()) {
    outward = {along.y(), -along.x()};
    if (outward.dot(centre - begin) > 0) outward = -outward;
  }
};

// Linear interpolation; NaN outside.
double SampleLight(const cv::Mat& light, double x, double y) {
  if (!(x >= 0 && y >= 0 && x < light.cols - 1 && y < light.rows - 1)) {
    return std::numeric_limits<double>::quiet_NaN();
  }
  const int column = static_cast<int>(x);
  const int row = static_cast<int>(y);
  const double fx = x - column;
  const double fy = y - row;
  const float* upper = light.ptr<float>(row) + column;
  const float* lower = light.ptr<float>(row + 1) + column;
  return (1 - fy) * ((1 - fx) * upper[0] + fx * upper[1]) +
         fy * ((1 - fx) * lower[0] + fx * lower[1]);
}

// Light across a side, from ink to paper, at several places along it.
struct Profiles {
  std::vector<double> along_px;             // where
  std::vector<std::vector<double>> values;  // at steps of kStep_px, centred on the side
  double reach_px = 0;
};

constexpr double kStep_px = 0.5;

// The ends of a side are left out: there the neighbouring side's blur rounds the corner.
std::optional<Profiles> TakeProfiles(const cv::Mat& light, const Side& side, double reach_px,
                                     int count) {
  constexpr double kEnd = 0.1;
  Profiles profiles;
  const int steps = std::max(4, static_cast<int>(std::ceil(reach_px / kStep_px)));
  profiles.reach_px = steps * kStep_px;
  for (int i = 0; i < count; ++i) {
    const double t = side.length_px * (kEnd + (1 - 2 * kEnd) * (i + 0.5) / count);
    std::vector<double> profile;
    profile.reserve(2 * static_cast<size_t>(steps) + 1);
    for (int k = -steps; k <= steps; ++k) {
      const Vector2d at = side.from + t * side.along + k * kStep_px * side.outward;
      profile.push_back(SampleLight(light, at.x(), at.y()));
      if (std::isnan(profile.back())) return std::nullopt;
    }
    profiles.along_px.push_back(t);
    profiles.values.push_back(std::move(profile));
  }
  return profiles;
}

// Levels of ink and paper beside a side: medians over the inner and outer quarters of all profiles.
struct Levels {
  double ink = 0;
  double paper = 0;
};

Levels FindLevels(const Profiles& profiles) {
  std::vector<double> inner;
  std::vector<double> outer;
  for (const std::vector<double>& values : profiles.values) {
    const auto quarter = static_cast<std::ptrdiff_t>(values.size() / 4);
    inner.insert(inner.end(), values.begin(), values.begin() + quarter);
    outer.insert(outer.end(), values.end() - quarter, values.end());
  }
  return {Median(inner), Median(outer)};
}

// Where the profile crosses `level` upwards, nearest its middle, from the side outwards, px.
std::optional<double> Crossing(const std::vector<double>& values, double reach_px, double level) {
  std::optional<double> nearest;
  for (size_t i = 0; i + 1 < values.size(); ++i) {
    if (!(values[i] < level && values[i + 1] >= level)) continue;
    const double at =
        (static_cast<double>(i) + (level - values[i]) / (values[i + 1] - values[i])) * kStep_px -
        reach_px;
    if (!nearest || std::abs(at) < std::abs(*nearest)) nearest = at;
  }
  return nearest;
}

// Where the edge crosses each profile: place along the side, and offset outwards, px.
struct EdgePoint {
  double along_px = 0;
  double offset_px = 0;
};

// offset = intercept + slope along.
struct Trend {
  double intercept = 0;
  double slope = 0;
  [[nodiscard]] double Residual(const EdgePoint& p) const {
    return p.offset_px - intercept - slope * p.along_px;
  }
};

// Median of the slopes of all pairs (of a selection, where there are many points): up to 29 % of
// the points may be anywhere. Theil 1950, "A rank-invariant method of linear and polynomial
// regression analysis"; Sen 1968, doi 10.1080/01621459.1968.10480934.
Trend RobustTrend(const std::vector<EdgePoint>& points) {
  const size_t stride = 1 + points.size() / 24;
  std::vector<double> slopes;
  for (size_t i = 0; i < points.size(); i += stride) {
    for (size_t k = i + stride; k < points.size(); k += stride) {
      slopes.push_back((points[k].offset_px - points[i].offset_px) /
                       (points[k].along_px - points[i].along_px));
    }
  }
  Trend trend{0, Median(slopes)};
  std::vector<double> offsets;
  offsets.reserve(points.size());
  for (const EdgePoint& p : points) offsets.push_back(trend.Residual(p));
  trend.intercept = Median(offsets);
  return trend;
}

Trend LeastSquaresTrend(const std::vector<EdgePoint>& points) {
  const auto n = static_cast<double>(points.size());
  double mean_along = 0;
  double mean_offset = 0;
  for (const EdgePoint& p : points) {
    mean_along += p.along_px / n;
    mean_offset += p.offset_px / n;
  }
  double square = 0;
  double product = 0;
  for (const EdgePoint& p : points) {
    square += (p.along_px - mean_along) * (p.along_px - mean_along);
    product += (p.along_px - mean_along) * (p.offset_px - mean_offset);
  }
  const double slope = product / square;
  return {mean_offset - slope * mean_along, slope};
}

// Least squares over what lies near the robust line: dirt or a shadow's edge is left out.
std::optional<Line> FitLine(const Side& side, const std::vector<EdgePoint>& points,
                            double most_scatter_px) {
  constexpr double kFloor_px = 0.01;  // rounding of the crossings: not an outlier
  const Trend robust = RobustTrend(points);
  std::vector<double> residuals;
  residuals.reserve(points.size());
  for (const EdgePoint& p : points) residuals.push_back(robust.Residual(p));
  const double limit_px = 3 * std::max(RobustDeviation(residuals), kFloor_px);
  std::vector<EdgePoint> kept;
  for (const EdgePoint& p : points) {
    if (std::abs(robust.Residual(p)) <= limit_px) kept.push_back(p);
  }
  const Trend trend = LeastSquaresTrend(kept);
  double squares = 0;
  for (const EdgePoint& p : kept) squares += trend.Residual(p) * trend.Residual(p);
  const double scatter_px = std::sqrt(squares / static_cast<double>(kept.size()));
  if (2 * kept.size() < points.size() || scatter_px > most_scatter_px) return std::nullopt;
  return Line{side.from + trend.intercept * side.outward, side.along + trend.slope * side.outward,
              scatter_px};
}

std::optional<Line> FitSide(const cv::Mat& light, const Side& side, double reach_px, int count,
                            const RefineCornersOptions& options) {
  const auto profiles = TakeProfiles(light, side, reach_px, count);
  if (!profiles) return std::nullopt;
  const Levels levels = FindLevels(*profiles);
  if (!(levels.paper - levels.ink >= options.least_contrast * levels.paper)) return std::nullopt;
  const double half = (levels.ink + levels.paper) / 2;
  std::vector<EdgePoint> points;
  for (size_t i = 0; i < profiles->values.size(); ++i) {
    const auto offset_px = Crossing(profiles->values[i], profiles->reach_px, half);
    if (offset_px) points.push_back({profiles->along_px[i], *offset_px});
  }
  if (2 * points.size() < profiles->values.size()) return std::nullopt;
  return FitLine(side, points, options.most_scatter_px);
}

Vector2d Intersection(const Line& a, const Line& b) {
  Eigen::Matrix2d directions;
  directions << a.direction, -b.direction;
  const Vector2d along = directions.inverse() * (b.point - a.point);
  return a.point + along.x() * a.direction;
}

std::optional<RefinedCorners> RefineOnce(const cv::Mat& light, const SquareCorners& rough,
                                         double reach, int most_profiles,
                                         const RefineCornersOptions& options) {
  const Vector2d centre = (rough[0] + rough[1] + rough[2] + rough[3]) / 4;
  std::array<Line, 4> lines;
  double squares = 0;
  for (size_t i = 0; i < 4; ++i) {
    const Side side(rough[i], rough[(i + 1) % 4], centre);
    const int count = std::clamp(static_cast<int>(side.length_px / 2), std::min(12, most_profiles),
                                 most_profiles);
    const auto line = FitSide(light, side, reach * side.length_px, count, options);
    if (!line) return std::nullopt;
    lines[i] = *line;
    squares += line->scatter_px * line->scatter_px / 4;
  }
  RefinedCorners refined;
  for (size_t i = 0; i < 4; ++i) refined.corners_px[i] = Intersection(lines[(i + 3) % 4], lines[i]);
  refined.scatter_px = std::sqrt(squares);
  return refined;
}

}  // namespace

void RefineCornersOptions::Check() const {
  const auto need = [](bool good, std::string_view field, double value, std::string_view rule) {
    if (!good) throw BadOption(fmt::format("{} = {}: {}", field, value, rule));
  };
  need(first_reach > 0 && first_reach <= 0.12, "first_reach", first_reach,
       "above 0 and up to 0.12 of a side is needed");
  need(reach > 0 && reach <= first_reach, "reach", reach,
       "above 0 and up to first_reach is needed");
  need(most_profiles >= 12, "most_profiles", most_profiles, "at least 12 are needed");
  need(least_contrast > 0 && least_contrast < 1, "least_contrast", least_contrast,
       "between 0 and 1 is needed");
  need(most_scatter_px > 0, "most_scatter_px", most_scatter_px, "more than 0 is needed");
}

std::optional<RefinedCorners> RefineCorners(const cv::Mat& light, cv::Point origin_px,
                                            const SquareCorners& rough_px,
                                            const RefineCornersOptions& options) {
  options.Check();
  const Vector2d origin(origin_px.x, origin_px.y);
  SquareCorners corners = rough_px;
  for (Vector2d& corner : corners) corner -= origin;
  // First with few profiles to come close, then with all, nearly at right angles to the edge.
  const auto close = RefineOnce(light, corners, options.first_reach, 12, options);
  if (!close) return std::nullopt;
  auto refined =
      RefineOnce(light, close->corners_px, options.reach, options.most_profiles, options);
  if (!refined) return std::nullopt;
  for (Vector2d& corner : refined->corners_px) corner += origin;
  return refined;
}

}  // namespace laygauge
