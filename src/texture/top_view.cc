#include "texture/top_view.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <vector>

namespace laygauge {
namespace {

constexpr double kReducedPxPerMm = 10;
constexpr double kWallSeamMm = 0.5;
constexpr double kTornSeamMm = 2;

cv::Mat Disk(double radius) {
  const int side = 2 * static_cast<int>(std::lround(radius)) + 1;
  return cv::getStructuringElement(cv::MORPH_ELLIPSE, {side, side});
}

// Quicker than a disk, for a seam along walls.
cv::Mat Square(double radius) {
  const int side = 2 * static_cast<int>(std::lround(radius)) + 1;
  return cv::Mat::ones(side, side, CV_8UC1);
}

// CV_8UC1, 255 where the reduced patch is searched.
cv::Mat SearchedPart(const cv::Mat& regions, double px_per_mm, const TornArea& torn) {
  cv::Mat searched;
  cv::erode(regions >= static_cast<int>(Region::kMargin), searched, Square(kWallSeamMm * px_per_mm),
            {-1, -1}, 1, cv::BORDER_CONSTANT, cv::Scalar::all(0));
  if (torn.area_pct > 0) {
    cv::Mat seam;
    cv::dilate(torn.torn, seam, Disk(kTornSeamMm * torn.cells_per_mm));
    cv::resize(seam, seam, searched.size(), 0, 0, cv::INTER_NEAREST);
    searched.setTo(0, seam);
  }
  return searched;
}

// Bounds of the turned rectangle, with a pixel to spare.
cv::Rect TurnedBounds(const cv::Rect& box, cv::Point2d along, cv::Point2d across, double scale) {
  std::vector<cv::Point2f> corners;
  for (const cv::Point& corner :
       {box.tl(), box.br(), cv::Point(box.x, box.br().y), cv::Point(box.br().x, box.y)}) {
    const cv::Point2d p(corner);
    corners.emplace_back(p.dot(along) * scale, p.dot(across) * scale);
  }
  const cv::Rect bounds = cv::boundingRect(corners);
  return {bounds.x - 1, bounds.y - 1, bounds.width + 2, bounds.height + 2};
}

}  // namespace

TopView MakeTopView(const Patch& patch, double lay_deg, const TornArea& torn) {
  const int reduction =
      std::max(1, static_cast<int>(std::lround(patch.px_per_mm / kReducedPxPerMm)));
  const double reduced_px_per_mm = patch.px_per_mm / reduction;
  const cv::Size size(patch.relative.cols / reduction, patch.relative.rows / reduction);
  const cv::Rect whole(0, 0, size.width * reduction, size.height * reduction);
  cv::Mat reduced;
  cv::Mat regions;
  cv::resize(patch.relative(whole), reduced, size, 0, 0, cv::INTER_AREA);
  cv::resize(patch.regions(whole), regions, size, 0, 0, cv::INTER_NEAREST);
  const cv::Mat searched = SearchedPart(regions, reduced_px_per_mm, torn);

  TopView view;
  view.px_per_mm = kTopViewPxPerMm;
  const cv::Rect box = cv::boundingRect(searched);
  if (box.area() == 0) {
    return view;
  }
  const double lay = lay_deg * std::numbers::pi / 180;
  const cv::Point2d along(std::cos(lay), -std::sin(lay));
  const cv::Point2d across(-along.y, along.x);
  const double scale = kTopViewPxPerMm / reduced_px_per_mm;
  const cv::Rect bounds = TurnedBounds(box, along, across, scale);
  const cv::Point2d step_x = along / scale;
  const cv::Point2d step_y = across / scale;
  const cv::Point2d start = step_x * bounds.x + step_y * bounds.y;
  const cv::Matx23d reduced_from_view(step_x.x, step_y.x, start.x, step_x.y, step_y.y, start.y);
  cv::warpAffine(reduced, view.relative, reduced_from_view, bounds.size(),
                 cv::INTER_LINEAR | cv::WARP_INVERSE_MAP);
  cv::warpAffine(searched, view.searched, reduced_from_view, bounds.size(),
                 cv::INTER_NEAREST | cv::WARP_INVERSE_MAP);
  view.relative.setTo(0, view.searched == 0);
  view.searched_cm2 = cv::countNonZero(view.searched) / std::pow(kTopViewPxPerMm * 10, 2);
  const cv::Point2d origin =
      (patch.origin_px + cv::Point2d(0.5, 0.5)) / reduction - cv::Point2d(0.5, 0.5);
  const double mm = 1 / reduced_px_per_mm;
  view.coupon_from_view = {step_x.x * mm, step_y.x * mm, (start.x - origin.x) * mm,
                           step_x.y * mm, step_y.y * mm, (start.y - origin.y) * mm};
  return view;
}

cv::Mat RemoveAlongRows(const cv::Mat& image, const TopView& view, double window_mm) {
  const int half = static_cast<int>(std::lround(window_mm * view.px_per_mm / 2));
  cv::Mat rest(image.size(), CV_32FC1);
  // Of the searched pixels before each column.
  std::vector<double> sums(static_cast<size_t>(image.cols) + 1, 0.0);
  std::vector<int> counts(sums.size(), 0);
  for (int y = 0; y < image.rows; ++y) {
    const auto* value = image.ptr<float>(y);
    const auto* on = view.searched.ptr<std::uint8_t>(y);
    auto* out = rest.ptr<float>(y);
    for (int x = 0; x < image.cols; ++x) {
      sums[x + 1] = sums[x] + (on[x] != 0 ? value[x] : 0.F);
      counts[x + 1] = counts[x] + (on[x] != 0 ? 1 : 0);
    }
    for (int x = 0; x < image.cols; ++x) {
      const int from = std::max(x - half, 0);
      const int to = std::min(x + half + 1, image.cols);
      const auto sum = static_cast<float>(sums[to] - sums[from]);
      const auto count = static_cast<float>(std::max(counts[to] - counts[from], 1));
      out[x] = on[x] != 0 ? value[x] - sum / count : 0.F;
    }
  }
  return rest;
}

double SpreadOn(const cv::Mat& image, const cv::Mat& searched, double p) {
  std::vector<float> values;
  for (int y = 0; y < image.rows; y += 4) {
    const auto* row = image.ptr<float>(y);
    const auto* on = searched.ptr<std::uint8_t>(y);
    for (int x = 0; x < image.cols; x += 4) {
      if (on[x] != 0) {
        values.push_back(std::abs(row[x]));
      }
    }
  }
  if (values.empty()) {
    return 0;
  }
  const auto at =
      values.begin() + static_cast<std::ptrdiff_t>(p * static_cast<double>(values.size() - 1));
  std::nth_element(values.begin(), at, values.end());
  // Half-normal quantiles (common practice): 0.6745, 1.1503, 1.6449.
  const double normal = p >= 0.9 ? 1.6449 : (p >= 0.75 ? 1.1503 : 0.6745);
  return *at / normal;
}

}  // namespace laygauge
