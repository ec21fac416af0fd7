#include "texture/blobs_metric.h"

#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <string>

#include "texture/blobs.h"

namespace laygauge {
namespace {

constexpr int kCorners = 16;  // of the circle that the overlay draws

constexpr double kDrawnFrom = 0.5;  // chance

// The chance that a lump of this excess is one, and is found in another photograph: from none at
// the least excess to a half 0.8 above it, where 185 local maxima of an exponential surface leave
// one false blob on 20 coupons, and 1 after as much again. Peaks of one lump differ by half a unit
// or so: counting by it, a lump at the limit cannot make the count jump.
double ChanceFound(double excess) {
  constexpr double kWidth = 1.6;
  return std::clamp((excess - BlobOptions{}.min_excess) / kWidth, 0.0, 1.0);
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
  double count = 0;
  double area_mm2 = 0;
  double area_variance = 0;
  double count_variance = 0;
  Finding finding;
  for (const Blob& blob : blobs) {
    const double found = ChanceFound(blob.excess);
    count += found;
    area_mm2 += found * blob.area_mm2;
    // A third of its area: the rim moves by a pixel of the view.
    area_variance += std::pow(blob.area_mm2, 2) * (found * found / 9 + found * (1 - found));
    count_variance += found * (1 - found);
    if (found < kDrawnFrom) continue;
    finding.marks.push_back(Circle(view.CouponPoint(blob.centre_px), blob.area_mm2));
  }
  // mm2 per cm2 is per cent.
  finding.features = {
      {count / view.searched_cm2, std::sqrt(count_variance) / view.searched_cm2, ""},
      {area_mm2 / view.searched_cm2, std::sqrt(area_variance) / view.searched_cm2, ""}};
  return finding;
}

}  // namespace

Metric BlobsMetric() {
  return {"blobs",
          4,
          {{"blob_count_per_cm2", "lumps, by area of top surface"},
           {"blob_area_pct", "share of the top surface that lumps take"}},
          &MeasureBlobs};
}

}  // namespace laygauge
