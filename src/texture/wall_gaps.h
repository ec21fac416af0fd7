#pragma once

#include "texture/metric.h"

namespace laygauge {

// Open seam between field and walls, along the outline and round each hole. docs/metrics.md,
// "Wall gaps".
[[nodiscard]] Metric WallGapsMetric();

}  // namespace laygauge
