#pragma once

#include "texture/metric.h"

namespace laygauge {

// Raised line edges from too much material. docs/metrics.md, "Ridges".
[[nodiscard]] Metric RidgesMetric();

}  // namespace laygauge
