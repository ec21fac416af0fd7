#include "coupon/equalize.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <opencv2/core.hpp>

#include "base/vectorize.h"
#include "coupon/equalizing_kernel.h"

namespace laygauge {

void EqualizeOptions::Check() const {
  if (!(working_blur_sd_mm >= 0.02 && working_blur_sd_mm <= 0.3)) {
    throw BadOption(
        fmt::format("working_blur_sd_mm = {}: must be 0.02 to 0.3", working_blur_sd_mm));
  }
  if (!(max_gain >= 1 && max_gain <= 10)) {
    throw BadOption(fmt::format("max_gain = {}: must be 1 to 10", max_gain));
  }
}

namespace {

// The photo's spread, blurred once more by the rectification.
LocalSpread SpreadOfPatch(const PatchPlace& place) {
  LocalSpread spread = place.spread;
  for (PointSpread* axis : {&spread.along_x, &spread.along_y}) {
    axis->blur_sd_mm = std::hypot(axis->blur_sd_mm, place.resampling_sd_mm);
  }
  return spread;
}

LAYGAUGE_WIDE_VECTORS
double FieldSum(const float* values, const std::uint8_t* regions, int count) {
  constexpr int kField = static_cast<int>(Region::kField);
  constexpr int kLanes = 8;
  const EightFloats none = {};
  EightFloats sums = {};
  int i = 0;
  for (; i + kLanes <= count; i += kLanes) {
    EightInts eight;
    ReadEight(regions + i, eight);
    sums += eight == kField ? *EightAt(values + i) : none;
  }
  double sum = 0;
  for (int lane = 0; lane < kLanes; ++lane) sum += sums[lane];
  for (; i < count; ++i) sum += regions[i] == kField ? values[i] : 0;
  return sum;
}

}  // namespace

Expected<Patch> Equalize(const Patch& patch, const PatchPlace& place,
                         const EqualizeOptions& options) {
  options.Check();
  constexpr double kMtf10OfGaussian = 0.341541100791;  // sqrt(ln 10 / 2) / pi
  const double frequency = kMtf10OfGaussian / options.working_blur_sd_mm;
  const double needed = 0.1 / options.max_gain;
  const LocalSpread spread = SpreadOfPatch(place);
  const double shown =
      std::min(spread.along_x.Modulation(frequency), spread.along_y.Modulation(frequency));
  if (shown < needed) {
    return Unmeasurable(fmt::format(
        "{}: the photo is blurrier than can be measured: detail of {:.2f} mm shows with {:.1f} % "
        "of its contrast, at least {:.0f} % is needed; focus, hold the camera still, or go nearer "
        "(there are {:.1f} pixels a mm).",
        place.where, 1 / frequency, 100 * shown, 100 * needed, place.spread.px_per_mm));
  }
  const SeparableFilter filter =
      DesignEqualizer(spread, patch.px_per_mm, options.working_blur_sd_mm, options.max_gain);
  Patch equalized = patch;
  double sum = 0;
  equalized.relative = filter.Apply(patch.relative, [&](const float* row, int y) {
    sum += FieldSum(row, patch.regions.ptr<std::uint8_t>(y), patch.regions.cols);
  });
  const double mean = sum / cv::countNonZero(patch.regions == static_cast<int>(Region::kField));
  equalized.relative /= mean;
  equalized.level = patch.level * mean;
  equalized.blur_sd_mm = options.working_blur_sd_mm;
  equalized.noise_sd = place.noise.RelativeSd(equalized.level * place.paper_light);
  return equalized;
}

}  // namespace laygauge
