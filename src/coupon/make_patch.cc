#include "coupon/make_patch.h"

#include <fmt/format.h>

#include <algorithm>
#include <cstring>
#include <vector>

#include "base/vectorize.h"
#include "coupon/rectify.h"

namespace laygauge {
namespace {

// The light falls off smoothly: a straight line over 1.6 mm of it errs by less than 1e-4.
constexpr int kLightStep_px = 32;

// 1 / light on the patch's row, at every kLightStep_px.
void FillInverseLight(const Light& light, const PlaneFrame& frame, int y,
                      std::vector<float>& nodes) {
  for (size_t i = 0; i < nodes.size(); ++i) {
    const cv::Point2d at =
        frame.SheetFromFrame({static_cast<double>(i * kLightStep_px), static_cast<double>(y)});
    nodes[i] = static_cast<float>(1 / light.At(at.x, at.y));
  }
}

constexpr float kClip = 0.985F;

// Sums over the field.
struct FieldSums {
  float linear = 0;
  float levelled = 0;
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

struct FieldMeans {
  double linear = 0;
  double levelled = 0;
  double clipped_pct = 0;
};

// Divides the picture by the light, in place. The field's means before and after.
FieldMeans Level(const Light& light, const PlaneFrame& frame, const CouponRegions& regions,
                 cv::Mat& picture) {
  const size_t columns = picture.cols / kLightStep_px + 2;
  std::vector<float> upper(columns);
  std::vector<float> lower(columns);
  FillInverseLight(light, frame, 0, lower);
  FieldMeans means;
  for (int top = 0; top < picture.rows; top += kLightStep_px) {
    upper.swap(lower);
    FillInverseLight(light, frame, top + kLightStep_px, lower);
    FieldSums sums;  // of few rows: single precision does
    for (int y = top; y < std::min(top + kLightStep_px, picture.rows); ++y) {
      const float down = static_cast<float>(y - top) / kLightStep_px;
      auto* row = picture.ptr<float>(y);
      const auto* region = regions.regions.ptr<std::uint8_t>(y);
      for (int x = 0, node = 0; x < picture.cols; x += kLightStep_px, ++node) {
        const float left = upper[node] + down * (lower[node] - upper[node]);
        const float right = upper[node + 1] + down * (lower[node + 1] - upper[node + 1]);
        LevelStretch({left, (right - left) / kLightStep_px}, region + x,
                     std::min(kLightStep_px, picture.cols - x), row + x, sums);
      }
    }
    means.linear += sums.linear;
    means.levelled += sums.levelled;
    means.clipped_pct += 100.0 * sums.clipped;
  }
  const auto count = static_cast<double>(regions.field_pixels);
  return {means.linear / count, means.levelled / count, means.clipped_pct / count};
}

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
  patch.relative = Rectify(photo, view, frame);
  patch.regions = regions.regions;
  patch.px_per_mm = regions.px_per_mm;
  patch.origin_px = regions.origin_px;
  const FieldMeans means = Level(light, frame, regions, patch.relative);
  if (means.clipped_pct > options.most_clipped_pct) {
    return Unmeasurable(
        fmt::format("{:.1f} % of the coupon is over-exposed; take the photo with less exposure",
                    means.clipped_pct));
  }
  if (means.linear < options.darkest_level) {
    return Unmeasurable(
        fmt::format("the coupon is too dark: its mean is {:.2f} % of full scale; use more exposure",
                    100 * means.linear));
  }
  patch.level = means.levelled;
  patch.relative *= 1 / patch.level;
  return patch;
}

}  // namespace laygauge
