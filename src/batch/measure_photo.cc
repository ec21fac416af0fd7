#include "batch/measure_photo.h"

#include <fmt/format.h>

#include <filesystem>
#include <opencv2/core.hpp>

#include "coupon/rectify.h"
#include "grade/indices.h"
#include "texture/metric.h"
#include "texture/surface.h"

namespace laygauge {
namespace {

struct PhotoStages {
  const Photo& photo;
  const SheetDescription& sheet;
  const CameraEstimate& camera;
  const CouponDescription& coupon;
  const CouponRegions& regions;
  const MeasurePhotoOptions& options;
  const Light& light;
  const SheetSharpness& sharpness;
  const PhotoNoise& noise;
};

Feature FeatureOf(const FeatureValue& value) { return {value.value, value.sd, "no part measured"}; }

// The indices first, then every metric's features in the table's order.
void MeasureTexture(const Patch& patch, const CouponDescription& coupon, CouponRecord& record) {
  const Surface surface = MakeSurface(patch, coupon);
  for (const Metric& metric : MetricTable()) {
    Finding finding = metric.measure(surface);
    for (size_t i = 0; i < metric.features.size(); ++i) {
      record.features.push_back(
          {std::string(metric.features[i].name), std::move(finding.features[i])});
    }
    std::move(finding.marks.begin(), finding.marks.end(), std::back_inserter(record.marks));
  }
  const FeatureTable features = FeaturesOf(record);
  record.features.insert(
      record.features.begin(),
      {{std::string(kRoughnessColumn), FeatureOf(IndexOf(RoughnessParts(), features))},
       {std::string(kDefectsColumn), FeatureOf(IndexOf(DefectParts(), features))}});
}

Expected<Patch> SharpPatch(const PhotoStages& stages, const Well& well,
                           const Placement& placement) {
  auto patch = MakePatch(stages.photo, stages.camera.view, stages.light, placement,
                         stages.coupon.thickness_mm, stages.regions, stages.options.patch);
  if (!patch) return patch;
  const double x_mm = placement.center_x_mm;
  const double y_mm = placement.center_y_mm;
  const LocalSpread spread = stages.sharpness.At(x_mm, y_mm, placement.turn_deg);
  return Equalize(*patch,
                  {.where = fmt::format("{}, well {}", stages.photo.file, well.name),
                   .spread = spread,
                   .paper_light = stages.light.At(x_mm, y_mm),
                   .resampling_sd_mm = ResamplingBlurSdMm(spread.px_per_mm, patch->px_per_mm),
                   .noise = stages.noise},
                  stages.options.equalize);
}

CouponRecord MeasureWell(const PhotoStages& stages, const Well& well, std::optional<Patch>& patch) {
  CouponRecord record;
  record.well = well.name;
  WellFinding found = LocateCoupon(stages.photo, stages.camera.view, stages.light, stages.sheet,
                                   well, stages.coupon, stages.options.locate);
  record.note = found.reason;
  if (found.state == WellState::kEmpty) return record;
  record.status = CouponStatus::kRetake;
  record.placement = found.placement;
  if (found.state == WellState::kUnclear) return record;
  auto made = SharpPatch(stages, well, *found.placement);
  if (!made) {
    record.note = made.error().message;
    return record;
  }
  patch = std::move(*made);
  record.status = CouponStatus::kOk;
  record.level = patch->level;
  record.noise_sd = patch->noise_sd;
  record.blur_sd_mm = patch->blur_sd_mm;
  MeasureTexture(*patch, stages.coupon, record);
  if (!stages.options.keep_patches) patch.reset();
  return record;
}

// What is to be noted of the file's coding; empty: nothing.
Expected<std::string> CheckCoding(const Photo& photo, const MeasurePhotoOptions& options) {
  if (!photo.jpeg_quality || *photo.jpeg_quality >= options.good_jpeg_quality) return "";
  if (*photo.jpeg_quality < options.least_jpeg_quality) {
    return Unmeasurable(fmt::format(
        "{}: saved as JPEG of quality {:.0f}, which hides fine lines; at least {:.0f} is needed: "
        "copy the camera's own file, of quality 85 or more",
        photo.file, *photo.jpeg_quality, options.least_jpeg_quality));
  }
  return fmt::format(
      "{}: saved as JPEG of quality {:.0f}, which weakens fine lines; copy the camera's own file, "
      "of quality 85 or more",
      photo.file, *photo.jpeg_quality);
}

}  // namespace

void MeasurePhotoOptions::Check() const {
  if (!(least_jpeg_quality >= 1 && least_jpeg_quality <= good_jpeg_quality)) {
    throw BadOption(fmt::format("least_jpeg_quality is {}: from 1 to good_jpeg_quality, {}",
                                least_jpeg_quality, good_jpeg_quality));
  }
  light.Check();
  sharpness.Check();
  locate.Check();
  regions.Check();
  patch.Check();
  equalize.Check();
}

Expected<PhotoMeasurement> MeasurePhoto(const Photo& photo, const SheetDescription& sheet,
                                        const CameraEstimate& camera,
                                        const CouponDescription& coupon,
                                        const CouponRegions& regions,
                                        const MeasurePhotoOptions& options) {
  options.Check();
  const auto coding_note = CheckCoding(photo, options);
  if (!coding_note) return tl::unexpected(coding_note.error());
  auto light = EstimateLight(photo, camera.view, sheet, options.light);
  if (!light) return tl::unexpected(light.error());
  auto sharpness = MeasureSharpness(photo, camera.view, sheet, options.sharpness);
  if (!sharpness) return tl::unexpected(sharpness.error());
  const auto noise = MeasureNoise(photo, camera.view, sheet, *sharpness,
                                  options.equalize.working_blur_sd_mm, options.equalize.max_gain);
  if (!noise) return tl::unexpected(noise.error());

  const PhotoStages stages{photo,   sheet,  camera,     coupon, regions,
                           options, *light, *sharpness, *noise};
  PhotoMeasurement measured;
  measured.record.coupons.resize(sheet.wells.size());
  measured.patches.resize(sheet.wells.size());
  cv::parallel_for_(cv::Range(0, static_cast<int>(sheet.wells.size())),
                    [&](const cv::Range& range) {
                      for (int i = range.start; i < range.end; ++i) {
                        const auto well = static_cast<size_t>(i);
                        measured.record.coupons[well] =
                            MeasureWell(stages, sheet.wells[well], measured.patches[well]);
                      }
                    });

  PhotoRecord& record = measured.record;
  record.file = std::filesystem::path(photo.file).filename().string();
  record.stem = photo.stem;
  record.size_px = photo.size();
  record.tags = photo.tags;
  record.sheet = sheet.name;
  record.bar_mm = sheet.scale_bar.length_mm();
  record.coupon = coupon.name;
  record.camera = camera;
  record.px_per_mm = regions.px_per_mm;
  record.notes = camera.notes;
  if (!coding_note->empty()) record.notes.push_back(*coding_note);
  record.notes.insert(record.notes.end(), light->warnings.begin(), light->warnings.end());
  record.light = std::move(*light);
  record.sharpness = std::move(*sharpness);
  return measured;
}

}  // namespace laygauge
