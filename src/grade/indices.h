#pragma once

#include <span>
#include <string_view>

#include "grade/scale.h"

namespace laygauge {

// A feature's share in an index: value over the level at which it is plainly seen at arm's length
// (common practice; a judgement, stated here, not fitted).
struct IndexPart {
  std::string_view feature;
  double plain_level = 1;  // in the feature's unit
};

// Periodic, aperiodic and waviness: what is left without any defect. The first two share a band of
// wavelengths, so that their levels are one root mean square: an amplitude of 0.15 is 0.106.
[[nodiscard]] std::span<const IndexPart> RoughnessParts();
// Gaps, ridges, scars, blobs, wall gaps, failure.
[[nodiscard]] std::span<const IndexPart> DefectParts();

// The sum of the parts, 0 (none) upward; 1: one of them is plainly seen, or several together.
// A feature that could not be measured adds nothing; none measured: no value. The parts' standard
// deviations add in quadrature. docs/metrics.md, "Indices".
[[nodiscard]] FeatureValue IndexOf(std::span<const IndexPart> parts, const FeatureTable& features);

// Columns of the result that hold the two indices.
inline constexpr std::string_view kRoughnessColumn = "roughness";
inline constexpr std::string_view kDefectsColumn = "defects";

}  // namespace laygauge
