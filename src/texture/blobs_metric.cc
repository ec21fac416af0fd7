#include "texture/blobs_metric.h"

#include <fmt/core.h>

#include <cmath>
#include <numbers>
#include <string>

#include "texture/blobs.h"

namespace laygauge {
namespace {

constexpr int kCorners = 16;  // of the circle that the overlay draws

// The chance that a blob of this excess is found again in another photograph; peaks of one blob
// differ by about one unit of excess.
double ChanceAgain(double excess) {
  return 0.5 * std::erfc(-(excess - BlobOptions{}.min_excess) / std::numbers::sqrt2);
}

Finding Unmeasured(const std::string& reason) {
  const Feature none{std::nullopt, std::nullopt, reason};
  return {{none, none}, {}};
}

Mark Circle(cv::Point2d centre_mm, double area_mm2) {
  const double radius_mm = std::sqrt(area_mm2 / std::numbers::pi);
  Mark mark{MarkKind::kBlob, {}, true, 0};
  for (int i = 0; i < kCorners; ++i) {
    const double angle = 2 * std::numbers::pi * i / kCorners;
    mark.path_mm.emplace_back(centre_mm +
                              radius_mm * cv::Point2d(std::cos(angle), std::sin(angle)));
  }
  return mark;
}

Finding MeasureBlobs(const Surface& surface) {
  if (surface.torn.Failed()) {
    return Unmeasured(
        fmt::format("{:.0f} % of the field is torn or lifted, and corners there look like blobs",
                    surface.torn.area_pct));
  }
  const TopView& view = surface.top;
  if (view.searched_cm2 <= 0) {
    return Unmeasured("the patch shows no top surface away from walls");
  }
  const std::vector<Blob> blobs = FindBlobs(view, surface.scars);
  double area_mm2 = 0;
  double area_variance = 0;
  double count_variance = 0;
  Finding finding;
  for (const Blob& blob : blobs) {
    const double again = ChanceAgain(blob.excess);
    area_mm2 += blob.area_mm2;
    // A third of its area: the rim moves by a pixel of the view.
    area_variance += std::pow(blob.area_mm2, 2) * (1.0 / 9 + again * (1 - again));
    count_variance += again * (1 - again);
    finding.marks.push_back(Circle(view.CouponPoint(blob.centre_px), blob.area_mm2));
  }
  // mm2 per cm2 is per cent.
  finding.features = {
      {static_cast<double>(blobs.size()) / view.searched_cm2,
       std::sqrt(count_variance) / view.searched_cm2, ""},
      {area_mm2 / view.searched_cm2, std::sqrt(area_variance) / view.searched_cm2, ""}};
  return finding;
}

}  // namespace

Metric BlobsMetric() {
  return {"blobs",
          1,
          {{"blob_count_per_cm2", "lumps, by area of top surface"},
           {"blob_area_pct", "share of the top surface that lumps take"}},
          &MeasureBlobs};
}

}  // namespace laygauge
