#include "report/record.h"

#include <nlohmann/json.hpp>

#include "base/version.h"

namespace laygauge {
namespace {

using Json = nlohmann::ordered_json;

constexpr int kRecordFormat = 1;

template <class T>
Json OrNull(const std::optional<T>& value) {
  return value ? Json(*value) : Json(nullptr);
}

Json TextOrNull(const std::string& text) { return text.empty() ? Json(nullptr) : Json(text); }

Json VectorJson(const Eigen::VectorXd& vector) {
  return std::vector<double>(vector.data(), vector.data() + vector.size());
}

Json TagsJson(const CameraTags& tags) {
  return {{"make", OrNull(tags.make)},
          {"model", OrNull(tags.model)},
          {"focal_length_mm", OrNull(tags.focal_length_mm)},
          {"focal_length_35mm", OrNull(tags.focal_length_35mm)},
          {"taken_at", OrNull(tags.taken_at)},
          {"orientation", tags.orientation}};
}

Json CameraJson(const CameraEstimate& estimate) {
  const Camera& camera = estimate.view.camera;
  const SheetPose& pose = estimate.view.pose;
  Json rotation = Json::array();
  for (int row = 0; row < 3; ++row) {
    rotation.push_back(VectorJson(pose.camera_from_sheet_rotation.row(row).transpose()));
  }
  Json markers = Json::array();
  for (const MarkerResidual& marker : estimate.markers) {
    markers.push_back({{"id", marker.id}, {"rms_px", marker.rms_px}, {"used", marker.used}});
  }
  return {{"focal_px", camera.focal_px},
          {"focal_sd_pct", estimate.focal_sd_pct},
          {"tagged_focal_px", OrNull(estimate.tagged_focal_px)},
          {"center_px", {camera.center_x_px, camera.center_y_px}},
          {"k1", camera.k1},
          {"k2", camera.k2},
          {"p1", camera.p1},
          {"p2", camera.p2},
          {"camera_from_sheet_rotation", rotation},
          {"camera_from_sheet_translation_mm", VectorJson(pose.camera_from_sheet_translation_mm)},
          {"rms_px", estimate.rms_px},
          {"rms_mm", estimate.rms_mm},
          {"top_scale_sd_pct", estimate.top_scale_sd_pct},
          {"least_px_per_mm", estimate.least_px_per_mm},
          {"photos_sharing", estimate.photos_sharing},
          {"spread_mm", estimate.spread_mm},
          {"stretch_pct", estimate.stretch_pct},
          {"markers", markers}};
}

Json LightJson(const Light& light) {
  Json json{{"unevenness", light.unevenness},
            {"clipped_pct", light.clipped_pct},
            {"used_pct", light.used_pct},
            {"residual_sd", light.residual_sd}};
  json["tone_gamma"] = light.tone ? Json(light.tone->gamma) : Json(nullptr);
  return json;
}

Json SharpnessJson(const SheetSharpness& sharpness) {
  Json edges = Json::array();
  for (const EdgeSharpness& edge : sharpness.edges) {
    edges.push_back({{"target", edge.target},
                     {"side", edge.side},
                     {"at_mm", VectorJson(edge.at_mm)},
                     {"mtf50_per_mm", edge.mtf50_per_mm},
                     {"rise_mm", edge.rise_mm}});
  }
  return {
      {"edges", edges}, {"from_markers", sharpness.from_markers}, {"skipped", sharpness.skipped}};
}

std::string_view MarkName(MarkKind kind) {
  switch (kind) {
    case MarkKind::kGap:
      return "gap";
    case MarkKind::kRidge:
      return "ridge";
    case MarkKind::kScar:
      return "scar";
    case MarkKind::kBlob:
      return "blob";
    case MarkKind::kWallGap:
      return "wall_gap";
    case MarkKind::kFailure:
      return "failure";
  }
  return "";
}

Json MarksJson(const std::vector<Mark>& marks) {
  Json list = Json::array();
  for (const Mark& mark : marks) {
    Json path = Json::array();
    for (const cv::Point2f& point : mark.path_mm) {
      // Two hundredths of a millimetre are below what a photo shows: two decimals keep files small.
      path.push_back({std::round(point.x * 100) / 100, std::round(point.y * 100) / 100});
    }
    Json item{{"kind", MarkName(mark.kind)}, {"closed", mark.closed}, {"path_mm", path}};
    if (!mark.closed) item["width_mm"] = mark.width_mm;
    list.push_back(std::move(item));
  }
  return list;
}

Json ScoreJson(const Score& score) {
  Json losses = Json::object();
  for (const Loss& loss : score.losses) losses[loss.name] = loss.points;
  return {{"value", score.value},
          {"sd", score.sd},
          {"losses", losses},
          {"unfamiliar", score.unfamiliar}};
}

Json CouponJson(const CouponRecord& coupon) {
  Json json{{"well", coupon.well},
            {"status", StatusName(coupon.status)},
            {"note", TextOrNull(coupon.note)}};
  if (coupon.placement) {
    const Placement& place = *coupon.placement;
    json["placement"] = {{"center_x_mm", place.center_x_mm}, {"center_y_mm", place.center_y_mm},
                         {"turn_deg", place.turn_deg},       {"center_sd_mm", place.center_sd_mm},
                         {"turn_sd_deg", place.turn_sd_deg}, {"outline_seen", place.outline_seen},
                         {"holes_seen", place.holes_seen}};
  }
  if (coupon.status != CouponStatus::kOk) return json;
  json["level"] = coupon.level;
  json["noise_sd"] = coupon.noise_sd;
  json["blur_sd_mm"] = coupon.blur_sd_mm;
  json["score"] = coupon.score ? ScoreJson(*coupon.score) : Json(nullptr);
  json["fault"] = TextOrNull(coupon.fault);
  json["fault_evidence"] = TextOrNull(coupon.fault_evidence);
  Json features = Json::object();
  for (const NamedFeature& named : coupon.features) {
    Json feature{{"value", OrNull(named.feature.value)}, {"sd", OrNull(named.feature.sd)}};
    if (!named.feature.value) feature["reason"] = named.feature.reason;
    features[named.name] = std::move(feature);
  }
  json["features"] = std::move(features);
  json["marks"] = MarksJson(coupon.marks);
  return json;
}

}  // namespace

FeatureTable FeaturesOf(const CouponRecord& coupon) {
  FeatureTable features;
  for (const NamedFeature& named : coupon.features) {
    features[named.name] = {named.feature.value, named.feature.sd};
  }
  return features;
}

std::string FormatRecord(const PhotoRecord& record) {
  Json metrics = Json::object();
  for (const Metric& metric : MetricTable()) metrics[std::string(metric.name)] = metric.version;
  Json options = Json::object();
  for (const auto& [name, value] : record.options) options[name] = value;
  Json json{{"format", kRecordFormat},
            {"program", ProgramVersion()},
            {"photo", record.file},
            {"batch", record.batch},
            {"take", TextOrNull(record.take)},
            {"operator", TextOrNull(record.operator_name)},
            {"filament", TextOrNull(record.filament)},
            {"size_px", {record.size_px.width, record.size_px.height}},
            {"tags", TagsJson(record.tags)},
            {"sheet", record.sheet},
            {"bar_mm", record.bar_mm},
            {"coupon", record.coupon},
            {"px_per_mm", record.px_per_mm},
            {"scale", record.scale_name},
            {"scale_content", record.scale_hash},
            {"metric_versions", metrics},
            {"options", options},
            {"notes", record.notes},
            {"camera", CameraJson(record.camera)},
            {"light", LightJson(record.light)},
            {"sharpness", SharpnessJson(record.sharpness)}};
  json["coupons"] = Json::array();
  for (const CouponRecord& coupon : record.coupons) json["coupons"].push_back(CouponJson(coupon));
  return json.dump(1, ' ', false, nlohmann::json::error_handler_t::replace) + "\n";
}

}  // namespace laygauge
