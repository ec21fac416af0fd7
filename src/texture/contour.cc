#include "texture/contour.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace laygauge {
namespace {

double SignedArea(const std::vector<cv::Point2d>& polygon) {
  double area = 0;
  for (std::size_t i = 0; i < polygon.size(); ++i) {
    area += polygon[i].cross(polygon[(i + 1) % polygon.size()]) / 2;
  }
  return area;
}

Contour SampleEdge(cv::Point2d from, cv::Point2d to, double inward_sign, double step_mm,
                   double corner_mm) {
  Contour contour;
  contour.step_mm = step_mm;
  const double length = cv::norm(to - from);
  const cv::Point2d along = (to - from) / length;
  const cv::Point2d inward = inward_sign * cv::Point2d(-along.y, along.x);
  const int count = static_cast<int>(std::floor((length - 2 * corner_mm) / step_mm));
  const double start = (length - count * step_mm) / 2;
  for (int i = 0; i <= count; ++i) {
    contour.points.push_back({from + along * (start + i * step_mm), inward});
  }
  return contour;
}

Contour SampleHole(const Hole& hole, double step_mm, double depth_mm) {
  Contour contour;
  contour.closed = true;
  const double radius = hole.diameter_mm / 2;
  const double length = 2 * std::numbers::pi * (radius + depth_mm);
  const int count = std::max(8, static_cast<int>(std::lround(length / step_mm)));
  contour.step_mm = length / count;
  for (int i = 0; i < count; ++i) {
    const double angle = 2 * std::numbers::pi * i / count;
    const cv::Point2d inward(std::cos(angle), std::sin(angle));
    contour.points.push_back({cv::Point2d(hole.x_mm, hole.y_mm) + radius * inward, inward});
  }
  return contour;
}

}  // namespace

std::vector<Contour> SampleContours(const CouponDescription& coupon, double step_mm,
                                    double depth_mm, double corner_mm) {
  std::vector<Contour> contours;
  const auto& outline = coupon.outline_mm;
  const double inward_sign = SignedArea(outline) > 0 ? 1 : -1;
  for (std::size_t i = 0; i < outline.size(); ++i) {
    const cv::Point2d from = outline[i];
    const cv::Point2d to = outline[(i + 1) % outline.size()];
    if (cv::norm(to - from) > 2 * corner_mm + step_mm) {
      contours.push_back(SampleEdge(from, to, inward_sign, step_mm, corner_mm));
    }
  }
  for (const Hole& hole : coupon.holes) {
    contours.push_back(SampleHole(hole, step_mm, depth_mm));
  }
  return contours;
}

}  // namespace laygauge
