#include "grade/indices.h"

#include <array>
#include <cmath>

namespace laygauge {

std::span<const IndexPart> RoughnessParts() {
  static constexpr std::array<IndexPart, 3> parts{{
      {"line_contrast", 0.15},
      {"aperiodic_roughness", 0.106},
      {"waviness", 0.04},
  }};
  return parts;
}

std::span<const IndexPart> DefectParts() {
  static constexpr std::array<IndexPart, 6> parts{{
      {"gap_area_pct", 2},
      {"ridge_um", 40},
      {"scar_length_mm_per_cm2", 2},
      {"blob_count_per_cm2", 0.5},
      {"wall_gap_mean_mm", 0.15},
      {"failure_area_pct", 5},
  }};
  return parts;
}

FeatureValue IndexOf(std::span<const IndexPart> parts, const FeatureTable& features) {
  FeatureValue index;
  double variance = 0;
  for (const IndexPart& part : parts) {
    const auto found = features.find(part.feature);
    if (found == features.end() || !found->second.value) continue;
    index.value = index.value.value_or(0) + *found->second.value / part.plain_level;
    variance += std::pow(found->second.sd.value_or(0) / part.plain_level, 2);
  }
  if (index.value) index.sd = std::sqrt(variance);
  return index;
}

}  // namespace laygauge
