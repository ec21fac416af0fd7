#include "texture/top_view.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <vector>

#include "base/vectorize.h"
#include "texture/structuring_element.h"

namespace laygauge {
namespace {

constexpr double kWallSeamMm = 0.5;
constexpr double kTornSeamMm = 2;

// CV_8UC1, 255 where the patch is searched.
cv::Mat SearchedPart(const ReducedPatch& patch, const TornArea& torn) {
  cv::Mat searched;
  cv::erode(patch.regions >= static_cast<int>(Region::kMargin), searched,
            Square(kWallSeamMm * patch.px_per_mm), {-1, -1}, 1, cv::BORDER_CONSTANT,
            cv::Scalar::all(0));
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

// Of a row: sums over the searched pixels before each column, with `half` columns that add nothing
// before the first and after the last.
struct SumsBefore {
  SumsBefore(int columns, int half_window)
      : cols(columns),
        half(half_window),
        sums(static_cast<std::size_t>(cols + 2 * half + 1), 0.0),
        counts(sums.size(), 0) {}

  void Fill(const float* value, const std::uint8_t* on) {
    double sum = 0;
    int count = 0;
    for (int x = 0; x < cols; ++x) {
      sum += on[x] != 0 ? value[x] : 0.F;
      count += on[x] != 0 ? 1 : 0;
      sums[x + half + 1] = sum;
      counts[x + half + 1] = count;
    }
    std::fill(sums.end() - half, sums.end(), sum);
    std::fill(counts.end() - half, counts.end(), count);
  }

  int cols;
  int half;
  std::vector<double> sums;
  std::vector<int> counts;
};

// A row less its mean over the window about each pixel; 0 where not searched.
LAYGAUGE_WIDE_VECTORS
void RemoveMean(const float* value, const std::uint8_t* on, const SumsBefore& before,
                float* __restrict out) {
  const double* sums = before.sums.data();
  const int* counts = before.counts.data();
  const int window = 2 * before.half + 1;
  for (int x = 0; x < before.cols; ++x) {
    const auto sum = static_cast<float>(sums[x + window] - sums[x]);
    const auto count = static_cast<float>(std::max(counts[x + window] - counts[x], 1));
    const float one = on[x] != 0 ? 1.F : 0.F;
    out[x] = one * (value[x] - sum / count);
  }
}

}  // namespace

TopView MakeTopView(const ReducedPatch& patch, double lay_deg, const TornArea& torn) {
  const cv::Mat searched = SearchedPart(patch, torn);

  TopView view;
  view.px_per_mm = kTopViewPxPerMm;
  const cv::Rect box = cv::boundingRect(searched);
  if (box.area() == 0) {
    return view;
  }
  const double lay = lay_deg * std::numbers::pi / 180;
  const cv::Point2d along(std::cos(lay), -std::sin(lay));
  const cv::Point2d across(-along.y, along.x);
  const double scale = kTopViewPxPerMm / patch.px_per_mm;
  const cv::Rect bounds = TurnedBounds(box, along, across, scale);
  const cv::Point2d step_x = along / scale;
  const cv::Point2d step_y = across / scale;
  const cv::Point2d start = step_x * bounds.x + step_y * bounds.y;
  const cv::Matx23d reduced_from_view(step_x.x, step_y.x, start.x, step_x.y, step_y.y, start.y);
  cv::warpAffine(patch.relative, view.relative, reduced_from_view, bounds.size(),
                 cv::INTER_LINEAR | cv::WARP_INVERSE_MAP);
  cv::warpAffine(searched, view.searched, reduced_from_view, bounds.size(),
                 cv::INTER_NEAREST | cv::WARP_INVERSE_MAP);
  view.relative.setTo(0, view.searched == 0);
  // Before it is turned: the same for every coupon of a drawing, whatever its lay.
  view.searched_cm2 = cv::countNonZero(searched) / std::pow(patch.px_per_mm * 10, 2);
  const cv::Point2d& origin = patch.origin_px;
  const double mm = 1 / patch.px_per_mm;
  view.coupon_from_view = {step_x.x * mm, step_y.x * mm, (start.x - origin.x) * mm,
                           step_x.y * mm, step_y.y * mm, (start.y - origin.y) * mm};
  return view;
}

cv::Mat RemoveAlongRows(const cv::Mat& image, const TopView& view, double window_mm) {
  const int half = static_cast<int>(std::lround(window_mm * view.px_per_mm / 2));
  cv::Mat rest(image.size(), CV_32FC1);
  SumsBefore before(image.cols, half);
  for (int y = 0; y < image.rows; ++y) {
    before.Fill(image.ptr<float>(y), view.searched.ptr<std::uint8_t>(y));
    RemoveMean(image.ptr<float>(y), view.searched.ptr<std::uint8_t>(y), before, rest.ptr<float>(y));
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
