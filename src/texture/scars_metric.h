#pragma once

#include "texture/metric.h"

namespace laygauge {

// Features: scar_length_mm_per_cm2, scar_length_mm, scar_count. docs/metrics.md, "Scars".
[[nodiscard]] Metric ScarsMetric();

}  // namespace laygauge
