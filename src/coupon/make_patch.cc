#include "coupon/make_patch.h"

#include <fmt/format.h>

#include <algorithm>
#include <numeric>
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

// Sums over the field, by column: many sums that grow at once.
struct ColumnSums {
  explicit ColumnSums(int columns) : values(columns, 0.F), clipped(columns, 0) {}
  [[nodiscard]] double Sum() const { return std::accumulate(values.begin(), values.end(), 0.0); }

  std::vector<float> values;
  std::vector<int> clipped;  // field pixels at or above the clip
};

LAYGAUGE_WIDE_VECTORS
void AddFieldRow(const float* value, const std::uint8_t* region, float clip, ColumnSums& sums) {
  float* values = sums.values.data();
  int* clipped = sums.clipped.data();
  for (size_t x = 0; x < sums.values.size(); ++x) {
    const bool in_field = region[x] == static_cast<std::uint8_t>(Region::kField);
    values[x] += in_field ? value[x] : 0.F;
    clipped[x] += in_field && value[x] >= clip ? 1 : 0;
  }
}

struct FieldMeans {
  double linear = 0;
  double levelled = 0;
  double clipped_pct = 0;
};

// Divides the picture by the light, in place. The field's means before and after.
FieldMeans Level(const Light& light, const PlaneFrame& frame, const CouponRegions& regions,
                 float clip, cv::Mat& picture) {
  ColumnSums linear(picture.cols);
  ColumnSums levelled(picture.cols);
  const size_t columns = picture.cols / kLightStep_px + 2;
  std::vector<float> upper(columns);
  std::vector<float> lower(columns);
  FillInverseLight(light, frame, 0, lower);
  for (int y = 0; y < picture.rows; ++y) {
    if (y % kLightStep_px == 0) {
      upper.swap(lower);
      FillInverseLight(light, frame, y + kLightStep_px, lower);
    }
    const float down = static_cast<float>(y % kLightStep_px) / kLightStep_px;
    auto* row = picture.ptr<float>(y);
    const auto* region = regions.regions.ptr<std::uint8_t>(y);
    AddFieldRow(row, region, clip, linear);
    for (int x = 0, node = 0; x < picture.cols; x += kLightStep_px, ++node) {
      const float left = upper[node] + down * (lower[node] - upper[node]);
      const float right = upper[node + 1] + down * (lower[node + 1] - upper[node + 1]);
      const float step = (right - left) / kLightStep_px;
      const int count = std::min(kLightStep_px, picture.cols - x);
      for (int i = 0; i < count; ++i) row[x + i] *= left + static_cast<float>(i) * step;
    }
    AddFieldRow(row, region, clip, levelled);
  }
  const auto count = static_cast<double>(regions.field_pixels);
  const int clipped = std::accumulate(linear.clipped.begin(), linear.clipped.end(), 0);
  return {linear.Sum() / count, levelled.Sum() / count, 100.0 * clipped / count};
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
  constexpr float kClip = 0.985F;
  const FieldMeans means = Level(light, frame, regions, kClip, patch.relative);
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
