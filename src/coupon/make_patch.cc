#include "coupon/make_patch.h"

#include <fmt/format.h>

#include <algorithm>
#include <cstring>
#include <vector>

#include "base/vectorize.h"
#include "coupon/rectify.h"

namespace laygauge {
namespace {

constexpr float kClip = 0.985F;

// Sums over the field.
struct FieldSums {
  double linear = 0;
  double levelled = 0;
  int clipped = 0;  // field pixels at or above the clip
};

// 1 / light along a stretch of a row: at its first pixel, and the step to the next.
struct StretchLight {
  float first = 1;
  float step = 0;
};

// Divides a stretch by the light and adds its field, before and after, to the sums.
LAYGAUGE_WIDE_VECTORS
void LevelStretch(const StretchLight& light, const std::uint8_t* region, int count, float* values,
                  FieldSums& sums) {
  constexpr int kField = static_cast<int>(Region::kField);
  constexpr int kLanes = 8;
  const EightFloats lanes = {0, 1, 2, 3, 4, 5, 6, 7};
  const EightFloats none = {};
  EightFloats linear = {};
  EightFloats levelled = {};
  EightInts clipped = {};
  int i = 0;
  for (; i + kLanes <= count; i += kLanes) {
    EightInts regions;
    ReadEight(region + i, regions);
    const EightInts in_field = regions == kField;
    const EightFloats before = *EightAt(values + i);
    const EightFloats after = before * (light.first + (static_cast<float>(i) + lanes) * light.step);
    std::memcpy(values + i, &after, sizeof after);
    linear += in_field ? before : none;
    levelled += in_field ? after : none;
    clipped -= in_field & (before >= kClip);  // true is -1
  }
  for (int lane = 0; lane < kLanes; ++lane) {
    sums.linear += linear[lane];
    sums.levelled += levelled[lane];
    sums.clipped += clipped[lane];
  }
  for (; i < count; ++i) {
    const float before = values[i];
    values[i] *= light.first + static_cast<float>(i) * light.step;
    if (region[i] != kField) continue;
    sums.linear += before;
    sums.levelled += values[i];
    sums.clipped += before >= kClip ? 1 : 0;
  }
}

// Divides a patch by the light, stretch by stretch as it is made.
class Leveller {
 public:
  Leveller(const Light& light, const PlaneFrame& frame, const cv::Mat& regions)
      : regions_(regions), columns_(frame.size_px.width / kStretch_px + 2) {
    const int rows = frame.size_px.height / kStretch_px + 2;
    for (int row = 0; row < rows; ++row) {
      for (int column = 0; column < columns_; ++column) {
        const cv::Point2d at = frame.SheetFromFrame(cv::Point2d(column, row) * kStretch_px);
        inverse_.push_back(static_cast<float>(1 / light.At(at.x, at.y)));
      }
    }
  }

  void operator()(const cv::Point& first, int count, float* values) {
    const float* upper = &inverse_[first.y / kStretch_px * columns_ + first.x / kStretch_px];
    const float* lower = upper + columns_;
    const float down = static_cast<float>(first.y % kStretch_px) / kStretch_px;
    const float left = upper[0] + down * (lower[0] - upper[0]);
    const float right = upper[1] + down * (lower[1] - upper[1]);
    LevelStretch({left, (right - left) / kStretch_px},
                 regions_.ptr<std::uint8_t>(first.y) + first.x, count, values, sums_);
  }

  [[nodiscard]] const FieldSums& sums() const { return sums_; }

 private:
  const cv::Mat& regions_;
  int columns_;
  // 1 / light at every kStretch_px. It falls off smoothly: a straight line over 1.6 mm of it errs
  // by less than 1e-4.
  std::vector<float> inverse_;
  FieldSums sums_;
};

}  // namespace

void PatchOptions::Check() const {
  if (!(most_clipped_pct >= 0 && most_clipped_pct <= 100)) {
    throw BadOption(
        fmt::format("PatchOptions.most_clipped_pct is {}; 0 to 100 is allowed", most_clipped_pct));
  }
  if (!(darkest_level >= 0 && darkest_level < 1)) {
    throw BadOption(
        fmt::format("PatchOptions.darkest_level is {}; 0 to below 1 is allowed", darkest_level));
  }
}

Expected<Patch> MakePatch(const Photo& photo, const View& view, const Light& light,
                          const Placement& placement, double thickness_mm,
                          const CouponRegions& regions, const PatchOptions& options) {
  options.Check();
  if (regions.field_pixels == 0) {
    return BadInput("the coupon has no field: all of it lies too close to its outline or holes");
  }
  PlaneFrame frame;
  frame.size_px = regions.regions.size();
  frame.px_per_mm = regions.px_per_mm;
  frame.origin_px = regions.origin_px;
  frame.center_mm = {placement.center_x_mm, placement.center_y_mm};
  frame.turn_deg = placement.turn_deg;
  frame.height_mm = thickness_mm;
  Patch patch;
  Leveller leveller(light, frame, regions.regions);
  patch.relative = Rectify(photo, view, frame, std::ref(leveller));
  patch.regions = regions.regions;
  patch.px_per_mm = regions.px_per_mm;
  patch.origin_px = regions.origin_px;
  const auto count = static_cast<double>(regions.field_pixels);
  const double clipped_pct = 100 * leveller.sums().clipped / count;
  if (clipped_pct > options.most_clipped_pct) {
    return Unmeasurable(fmt::format(
        "{:.1f} % of the coupon is over-exposed; take the photo with less exposure", clipped_pct));
  }
  const double linear = leveller.sums().linear / count;
  if (linear < options.darkest_level) {
    return Unmeasurable(
        fmt::format("the coupon is too dark: its mean is {:.2f} % of full scale; use more exposure",
                    100 * linear));
  }
  patch.level = leveller.sums().levelled / count;
  patch.relative *= 1 / patch.level;
  return patch;
}

}  // namespace laygauge
