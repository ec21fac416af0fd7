#include "texture/failure_metric.h"

#include <cmath>
#include <opencv2/imgproc.hpp>

namespace laygauge {
namespace {

// The border of an area is known to about half the averaging window's blur.
constexpr double kBorderSdMm = 0.3;

std::vector<std::vector<cv::Point>> Borders(const TornArea& area) {
  std::vector<std::vector<cv::Point>> borders;
  cv::findContours(area.torn, borders, cv::RETR_EXTERNAL, cv::CHAIN_APPROX_SIMPLE);
  return borders;
}

Mark AreaMark(const std::vector<cv::Point>& border, const TornArea& area) {
  std::vector<cv::Point> smooth;
  cv::approxPolyDP(border, smooth, 0.7, true);
  Mark mark{MarkKind::kFailure, {}, true, 0};
  for (const cv::Point& cell : smooth) {
    mark.path_mm.emplace_back((cv::Point2d(cell) - area.origin_cell) / area.cells_per_mm);
  }
  return mark;
}

Finding MeasureFailure(const Surface& surface) {
  const TornArea& area = surface.torn;
  const double field_mm2 = cv::countNonZero(area.field) / std::pow(area.cells_per_mm, 2);
  if (field_mm2 <= 0) {
    return {{{std::nullopt, std::nullopt, "the patch holds no field"}}, {}};
  }
  Finding finding;
  double variance_mm4 = 0;
  for (const auto& border : Borders(area)) {
    finding.marks.push_back(AreaMark(border, area));
    const double border_mm = cv::arcLength(border, true) / area.cells_per_mm;
    // Independent errors along the border every window's width, 2.4 mm.
    variance_mm4 += std::pow(kBorderSdMm, 2) * border_mm * 2.4;
  }
  finding.features = {{area.area_pct, 100 * std::sqrt(variance_mm4) / field_mm2, ""}};
  return finding;
}

}  // namespace

Metric FailureMetric() {
  return {"failure",
          2,
          {{"failure_area_pct", "torn, lifted or missing share of the field"}},
          &MeasureFailure};
}

}  // namespace laygauge
