#pragma once

#include "grade/scale.h"

namespace laygauge {

// Two terms with round numbers, for tests: D = 2 * gap / (gap + 2) * 2 + ridge / 10.
inline Scale ExampleScale() {
  Scale scale;
  scale.name = "example-1";
  scale.remark = "an example";
  scale.conditions = "none";
  scale.working_px_per_mm = 20;
  ScaleTerm gaps;
  gaps.range = {"gap_area_pct", "gaps", 1, 0, 10};
  gaps.loss = "gaps";
  gaps.transform = {TransformKind::kSaturating, 2};
  gaps.when_missing = WhenMissing::kRefuse;
  gaps.weight = 2;
  ScaleTerm ridges;
  ridges.range = {"ridge_index", "ridges", 3, 0, 20};
  ridges.loss = "ridges";
  ridges.transform = {TransformKind::kLinear, 10};
  ridges.when_missing = WhenMissing::kTypical;
  ridges.weight = 1;
  ridges.typical_term = 0.5;
  ridges.typical_sd = 0.4;
  scale.terms = {gaps, ridges};
  scale.covariance = Eigen::Vector2d(0.04, 0.09).asDiagonal();
  scale.watched = {{"pitch_mm", "lines", 1, 0.3, 0.5}};
  scale.residual_sd = 0.3;
  scale.grader_sd = 0.4;
  scale.strictness_sd = 0.5;
  scale.panel = 3;
  scale.coupons = {{"b1", "A1", 8.5, 8.2}};
  scale.accuracy = {{"one coupon at a time", 1, 0.3, 0.4, 0.9, std::nullopt}};
  scale.report = {"fitted to an example", ""};
  return scale;
}

inline FeatureTable ExampleFeatures(double gap, double ridge) {
  return {{"gap_area_pct", {gap, std::nullopt}},
          {"ridge_index", {ridge, std::nullopt}},
          {"pitch_mm", {0.4, std::nullopt}}};
}

}  // namespace laygauge
