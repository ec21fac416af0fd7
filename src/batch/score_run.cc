#include "batch/score_run.h"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <set>

#include "batch/combine_takes.h"
#include "grade/fault.h"
#include "grade/indices.h"
#include "grade/scale_file.h"
#include "texture/metric.h"

namespace laygauge {
namespace {

std::vector<std::string> FeatureColumns() {
  std::vector<std::string> columns{std::string(kRoughnessColumn), std::string(kDefectsColumn)};
  for (const Metric& metric : MetricTable()) {
    for (const FeatureInfo& feature : metric.features) columns.emplace_back(feature.name);
  }
  return columns;
}

PhotoListEntry EntryOf(const ScoreRunRequest& request, const std::filesystem::path& photo) {
  return request.photo_list ? request.photo_list->EntryOf(photo) : PhotoList{}.EntryOf(photo);
}

RunSettings SettingsOf(const ScoreRunRequest& request, const std::string& batch,
                       const std::string& well) {
  RunSettings settings;
  if (!request.runs) return settings;
  const std::vector<std::string> values = request.runs->SettingsOf(batch, well);
  for (size_t i = 0; i < values.size(); ++i) settings[request.runs->setting_columns[i]] = values[i];
  return settings;
}

// Every well that the run sheet lists for a photographed batch must be on its sheet.
Done CheckRunSheet(const ScoreRunRequest& request, const std::vector<OpenedPhoto>& opened) {
  if (!request.runs) return {};
  for (const OpenedPhoto& photo : opened) {
    const std::string batch = EntryOf(request, photo.path).batch;
    const SheetDescription& sheet = photo.sighting.found.sheet;
    for (const auto& [key, line] : request.runs->lines) {
      if (key.first != batch || sheet.FindWell(key.second) != nullptr) continue;
      std::vector<std::string> names;
      for (const Well& well : sheet.wells) names.push_back(well.name);
      return BadInput(fmt::format(
          "{}, line {}: well \"{}\" is not on sheet {} of batch {}; its "
          "wells are {}",
          request.runs->file, line, key.second, sheet.name, batch, fmt::join(names, ", ")));
    }
  }
  return {};
}

std::vector<std::pair<std::string, double>> OptionsOf(const ScoreRunRequest& request) {
  const EstimateCameraOptions& camera = request.camera;
  const MeasurePhotoOptions& measure = request.measure;
  return {{"camera.focal_model_sd", camera.focal_model_sd},
          {"camera.untagged_focal_35mm", camera.untagged_focal_35mm},
          {"camera.untagged_focal_log_sd", camera.untagged_focal_log_sd},
          {"camera.center_sd", camera.center_sd},
          {"camera.most_rms_px", camera.most_rms_px},
          {"camera.most_rms_mm", camera.most_rms_mm},
          {"camera.least_px_per_mm", camera.least_px_per_mm},
          {"light.degree", measure.light.degree},
          {"locate.reach_mm", measure.locate.reach_mm},
          {"locate.turn_reach_deg", measure.locate.turn_reach_deg},
          {"regions.px_per_mm", measure.regions.px_per_mm},
          {"regions.field_from_outline_mm", measure.regions.field_from_outline_mm},
          {"regions.field_from_hole_mm", measure.regions.field_from_hole_mm},
          {"equalize.working_blur_sd_mm", measure.equalize.working_blur_sd_mm},
          {"equalize.max_gain", measure.equalize.max_gain}};
}

// The stage of one photo, from its camera to its record.
Expected<PhotoMeasurement> MeasureOpened(const ScoreRunRequest& request,
                                         const CouponRegions& regions, OpenedPhoto& opened,
                                         const CameraEstimate& camera) {
  if (!opened.photo) {
    auto again = ReadPhoto(opened.path);
    if (!again) return tl::unexpected(again.error());
    opened.photo = std::move(*again);
  }
  auto measured = MeasurePhoto(*opened.photo, opened.sighting.found.sheet, camera, request.coupon,
                               regions, request.measure);
  opened.photo.reset();
  if (!measured) return measured;
  PhotoRecord& record = measured->record;
  const PhotoListEntry entry = EntryOf(request, opened.path);
  record.batch = entry.batch;
  record.take = entry.take;
  record.operator_name = entry.operator_name;
  record.filament = entry.filament;
  record.scale_name = request.scale.name;
  record.scale_hash = ScaleContentHash(request.scale);
  record.options = OptionsOf(request);
  const auto& found_notes = opened.sighting.found.notes;
  record.notes.insert(record.notes.begin(), found_notes.begin(), found_notes.end());
  for (CouponRecord& coupon : record.coupons) {
    if (coupon.status != CouponStatus::kOk) continue;
    const FeatureTable features = FeaturesOf(coupon);
    if (auto score = ScoreCoupon(request.scale, features)) coupon.score = *score;
    const Fault fault = ChiefFault(features, SettingsOf(request, record.batch, coupon.well));
    coupon.fault = fault.name;
    coupon.fault_evidence = fault.evidence;
  }
  return measured;
}

PhotoSummary SummaryOf(const ScoreRunRequest& request, const PhotoRecord& record) {
  PhotoSummary summary{.file = record.file,
                       .sheet = record.sheet,
                       .rms_px = record.camera.rms_px,
                       .rms_mm = record.camera.rms_mm,
                       .least_px_per_mm = record.camera.least_px_per_mm};
  for (const MarkerResidual& marker : record.camera.markers) summary.markers_used += marker.used;
  for (const SheetDescription& sheet : request.sheets) {
    if (sheet.name == record.sheet) {
      summary.markers_on_sheet = static_cast<int>(sheet.markers.size());
    }
  }
  return summary;
}

// Settings from the run sheet; what it does not list is noted.
void AddSettings(const ScoreRunRequest& request, ResultTable& table,
                 std::vector<std::string>& notes) {
  if (!request.runs) return;
  table.setting_columns = request.runs->setting_columns;
  std::set<std::string> listed;
  for (const auto& [key, line] : request.runs->lines) listed.insert(key.first);
  std::set<std::string> unlisted;
  for (ResultRow& row : table.rows) {
    row.settings = request.runs->SettingsOf(row.batch, row.well);
    const bool there = row.status != CouponStatus::kEmpty;
    const bool known = request.runs->runs.contains({row.batch, row.well});
    if (!listed.contains(row.batch)) {
      unlisted.insert(row.batch);
    } else if (there && !known) {
      row.note += row.note.empty() ? "not in the run sheet" : "; not in the run sheet";
    } else if (!there && known && row.note.empty()) {
      row.note = "in the run sheet, but the well is empty";
    }
  }
  if (!unlisted.empty()) {
    notes.push_back(
        fmt::format("{}: lists no run of batch {}; its coupons are scored without settings",
                    request.runs->file, fmt::join(unlisted, ", ")));
  }
}

FeatureTable FeaturesOf(const ResultTable& table, const ResultRow& row) {
  FeatureTable features;
  for (size_t i = 0; i < table.feature_columns.size(); ++i) {
    features[table.feature_columns[i]] = {row.features[i], std::nullopt};
  }
  return features;
}

// The chief fault of each row, and what a whole batch says about the extrusion.
void AddFaults(const ScoreRunRequest& request, ResultTable& table,
               std::vector<std::string>& notes) {
  std::vector<std::pair<std::string, std::vector<JudgedRun>>> batches;
  for (ResultRow& row : table.rows) {
    if (row.status != CouponStatus::kOk) continue;
    JudgedRun run{row.well, FeaturesOf(table, row), SettingsOf(request, row.batch, row.well)};
    row.fault = ChiefFault(run.features, run.settings).name;
    if (batches.empty() || batches.back().first != row.batch) batches.push_back({row.batch, {}});
    batches.back().second.push_back(std::move(run));
  }
  for (const auto& [batch, runs] : batches) {
    const std::string warning = ExtrusionWarning(batch, runs);
    if (!warning.empty()) notes.push_back(warning);
  }
}

}  // namespace

Expected<ScoreRun> RunScoring(const ScoreRunRequest& request, const TakePhoto& take,
                              const Progress& progress) {
  if (auto done = CheckMetricVersions(request.scale, MetricTable(), request.scale_file); !done) {
    return tl::unexpected(done.error());
  }
  OpenedPhotos photos = OpenPhotos(request.photos, request.sheets, request.open, progress);
  if (auto done = CheckRunSheet(request, photos.opened); !done) {
    return tl::unexpected(done.error());
  }
  ScoreRun run;
  run.refused = std::move(photos.refused);
  std::vector<SheetSighting> sightings;
  for (const OpenedPhoto& opened : photos.opened) sightings.push_back(opened.sighting);
  const auto cameras = EstimateCameras(sightings, request.camera);

  const CouponRegions regions = MakeRegions(request.coupon, request.measure.regions);
  std::vector<PhotoRecord> records;
  for (size_t i = 0; i < photos.opened.size(); ++i) {
    OpenedPhoto& opened = photos.opened[i];
    auto measured = cameras[i] ? MeasureOpened(request, regions, opened, *cameras[i])
                               : Expected<PhotoMeasurement>(tl::unexpected(cameras[i].error()));
    if (!measured) {
      run.refused.push_back({opened.path.string(), measured.error()});
    } else {
      if (auto done = take(*measured); !done) return tl::unexpected(done.error());
      for (const std::string& note : measured->record.notes) {
        run.notes.push_back(note);
      }
      records.push_back(std::move(measured->record));
    }
    if (progress) progress(static_cast<int>(request.photos.size() + i + 1));
  }
  for (const PhotoRecord& record : records) run.photos.push_back(SummaryOf(request, record));

  run.table.feature_columns = FeatureColumns();
  run.table.rows = request.each_take
                       ? EachTake(records, run.table.feature_columns, request.scale)
                       : CombineTakes(records, run.table.feature_columns, request.scale);
  run.table.each_take = request.each_take;
  run.table.with_loss = request.with_loss;
  run.table.scale_name = request.scale.name;
  run.table.scale_remark = request.scale.remark;
  AddSettings(request, run.table, run.notes);
  AddFaults(request, run.table, run.notes);
  return run;
}

}  // namespace laygauge
