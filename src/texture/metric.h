#pragma once

#include <opencv2/core.hpp>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "texture/surface.h"

namespace laygauge {

// A column of the result: its name ends in its unit.
struct FeatureInfo {
  std::string_view name;
  std::string_view meaning;  // one phrase for a person
};

// A measured feature. No value: `reason` says why in words, for a person.
struct Feature {
  std::optional<double> value;
  std::optional<double> sd;  // standard deviation of the value, from parts of the field or noise
  std::string reason;
};

enum class MarkKind { kGap, kRidge, kScar, kBlob, kWallGap, kFailure };

// Something found on the coupon, for overlays and records. Coupon frame, mm.
struct Mark {
  MarkKind kind = MarkKind::kGap;
  std::vector<cv::Point2f> path_mm;  // a polyline, or the corners of an area
  bool closed = false;               // an area
  double width_mm = 0;               // of a polyline; 0 for areas
};

struct Finding {
  std::vector<Feature> features;  // parallel to Metric::features
  std::vector<Mark> marks;
};

// One family of features. `version` grows whenever a definition, default or number changes.
struct Metric {
  std::string_view name;  // "gaps"
  int version = 1;
  std::vector<FeatureInfo> features;
  Finding (*measure)(const Surface& surface) = nullptr;
};

// All metrics, in the order of the result's columns.
[[nodiscard]] const std::vector<Metric>& MetricTable();

}  // namespace laygauge
